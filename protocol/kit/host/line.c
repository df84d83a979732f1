/* The line: a pseudo-terminal, or standard input and output. */
#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <stdlib.h>
#include <string.h>
#include <termios.h>
#include <unistd.h>

#include "host.h"

#define STALE_NS 500000000u /* nobody read for so long: what is held would be old news */

static int unblocked(int file)
{
    const int flags = fcntl(file, F_GETFL);
    return flags >= 0 && fcntl(file, F_SETFL, flags | O_NONBLOCK) == 0;
}

/* Bytes as they are: no echo, no lines, no signals, eight bits. */
static int make_raw(int file)
{
    struct termios settings;
    if (tcgetattr(file, &settings) != 0) {
        return 0;
    }
    settings.c_iflag &= ~(tcflag_t)(IGNBRK | BRKINT | PARMRK | ISTRIP | INLCR | IGNCR | ICRNL | IXON);
    settings.c_oflag &= ~(tcflag_t)OPOST;
    settings.c_lflag &= ~(tcflag_t)(ECHO | ECHONL | ICANON | ISIG | IEXTEN);
    settings.c_cflag &= ~(tcflag_t)(CSIZE | PARENB);
    settings.c_cflag |= CS8;
    return tcsetattr(file, TCSANOW, &settings) == 0;
}

/* Open a pseudo-terminal and say where it is. The slave's side is kept open here as well: so the
 * settings outlast a reader, and the master reports no error in between. */
static int open_pty(host_line *line)
{
    const int master = posix_openpt(O_RDWR | O_NOCTTY);
    if (master < 0 || grantpt(master) != 0 || unlockpt(master) != 0) {
        return 0;
    }
    const char *path = ptsname(master);
    line->slave = path ? open(path, O_RDWR | O_NOCTTY) : -1;
    if (line->slave < 0 || !make_raw(line->slave)) {
        return 0;
    }
    line->in = line->out = master;
    return printf("%s\n", path) > 0 && fflush(stdout) == 0;
}

int open_line(host_line *line, int pty)
{
    line->in = STDIN_FILENO;
    line->out = STDOUT_FILENO;
    line->slave = -1;
    line->waiting = 0;
    if ((pty && !open_pty(line)) || !unblocked(line->in) || !unblocked(line->out)) {
        fprintf(stderr, "tw_host: the line cannot be opened: %s\n", strerror(errno));
        return 0;
    }
    return 1;
}

int read_line(host_line *line, uint8_t *bytes, size_t room, int wait_ms)
{
    struct pollfd ready = {line->in, POLLIN, 0};
    if (poll(&ready, 1, wait_ms) <= 0) {
        return 0;
    }
    const ssize_t count = read(line->in, bytes, room);
    if (count > 0) {
        return (int)count;
    }
    if (line->slave < 0 && count == 0) {
        return -1; /* standard input has ended */
    }
    return 0;
}

void flush_line(host_line *line, uint64_t now_ns)
{
    if (line->waiting == 0) {
        line->moved_ns = now_ns;
        return;
    }
    const ssize_t count = write(line->out, line->held, line->waiting);
    if (count > 0) {
        line->waiting -= (size_t)count;
        memmove(line->held, line->held + count, line->waiting);
        line->moved_ns = now_ns;
    } else if (now_ns - line->moved_ns > STALE_NS) {
        line->waiting = 0;
        if (line->slave >= 0) {
            (void)tcflush(line->slave, TCIFLUSH); /* nor what lies in the terminal */
        }
    }
}

void write_line(host_line *line, const uint8_t *bytes, size_t length, uint64_t now_ns)
{
    flush_line(line, now_ns);
    if (line->waiting + length <= sizeof line->held) { /* else lost, as on a real line */
        memcpy(line->held + line->waiting, bytes, length);
        line->waiting += length;
    }
    flush_line(line, now_ns);
}
