/* Whole modules in C alone, on a pseudo-terminal or on standard input and output. */
#include <signal.h>
#include <stdlib.h>
#include <string.h>

#include "host.h"

static volatile sig_atomic_t told_to_end;

static void end_soon(int signal_number)
{
    (void)signal_number;
    told_to_end = 1;
}

/* One piece of the stream, delimiter included, to every module; each loses or hears it twice by a
 * chance of its own, as over radio. */
static void hear_piece(host_world *world, host_box *boxes, const uint8_t *piece, size_t length)
{
    for (unsigned place = 0; place < world->options.modules; place++) {
        int times = uniform(&world->random) < world->options.loss ? 0 : 1;
        times += times && uniform(&world->random) < world->options.repeat;
        for (; times > 0; times--) {
            for (size_t at = 0; at < length; at++) {
                tw_module_hear(&boxes[place].module, piece[at]);
            }
        }
    }
}

/* Cut the stream into pieces. One that is longer than any frame is passed on in parts: it is for
 * the modules to drop it. */
static void hear(host_world *world, host_box *boxes, const uint8_t *bytes, size_t length)
{
    static uint8_t piece[MOST_PIECE];
    static size_t held;
    for (size_t at = 0; at < length; at++) {
        piece[held++] = bytes[at];
        if (bytes[at] == 0 || held == sizeof piece) {
            hear_piece(world, boxes, piece, held);
            held = 0;
        }
    }
}

static void run(host_world *world, host_box *boxes)
{
    uint8_t bytes[MOST_PIECE];
    uint64_t before_ns = now_ns();
    while (!told_to_end) {
        const int count = read_line(&world->line, bytes, sizeof bytes, 1);
        if (count < 0) {
            return;
        }
        const uint64_t time_ns = now_ns();
        for (unsigned place = 0; place < world->options.modules; place++) {
            step_box(&boxes[place], (double)(time_ns - before_ns) * 1e-9);
            tw_module_wake(&boxes[place].module);
        }
        before_ns = time_ns;
        hear(world, boxes, bytes, (size_t)count);
        flush_line(&world->line, time_ns);
    }
}

int main(int count, char **words)
{
    static host_world world;
    if (!read_options(count, words, &world.options)) {
        return 2;
    }
    world.random = world.options.seed ^ UINT64_C(0x5DEECE66D1CE4E5B);
    if (!read_keys(&world) || !open_files(&world) ||
        !open_line(&world.line, world.options.pty)) {
        return 1;
    }
    host_box *boxes = calloc(world.options.modules, sizeof *boxes);
    if (boxes == NULL) {
        fprintf(stderr, "tw_host: no memory for so many modules\n");
        return 1;
    }
    (void)signal(SIGINT, end_soon);
    (void)signal(SIGTERM, end_soon);
    (void)signal(SIGPIPE, SIG_IGN);
    world.start_ns = now_ns();
    for (unsigned place = 0; place < world.options.modules; place++) {
        start_box(&boxes[place], &world, place);
    }
    run(&world, boxes);
    free(boxes);
    return 0;
}
