/* Files: keys, what is kept over restarts, and the tally of commands carried out. */
#include <errno.h>
#include <fcntl.h>
#include <stdlib.h>
#include <string.h>
#include <unistd.h>

#include "host.h"

static int wrong(const char *path, const char *what)
{
    fprintf(stderr, "tw_host: %s: %s\n", path, what);
    return 0;
}

/* The line without comment and blanks about it. What is in quotation marks has no '#' in it. */
static char *trimmed(char *text)
{
    text[strcspn(text, "#\n\r")] = 0;
    text += strspn(text, " \t");
    for (size_t n = strlen(text); n > 0 && strchr(" \t", text[n - 1]); n--) {
        text[n - 1] = 0;
    }
    return text;
}

/* "name = value"; returns the value, NULL where the line is another. */
static char *value_of(char *text, const char *name)
{
    const size_t n = strlen(name);
    if (strncmp(text, name, n) != 0) {
        return NULL;
    }
    text += n + strspn(text + n, " \t");
    return *text == '=' ? text + 1 + strspn(text + 1, " \t") : NULL;
}

static int is_slot(const char *text)
{
    return text[0] >= '0' && text[0] <= '7' && text[1] == 0;
}

static int read_hex(const char *text, uint8_t key[TW_KEY_BYTES])
{
    if (strlen(text) != TW_KEY_BYTES * 2 + 2 || text[0] != '"' || text[TW_KEY_BYTES * 2 + 1] != '"') {
        return 0;
    }
    for (size_t at = 0; at < TW_KEY_BYTES; at++) {
        const char digits[3] = {text[1 + 2 * at], text[2 + 2 * at], 0};
        if (strspn(digits, "0123456789abcdefABCDEF") != 2) {
            return 0;
        }
        key[at] = (uint8_t)strtoul(digits, NULL, 16);
    }
    return 1;
}

/* What was read of one [[key]] so far. */
typedef struct {
    int slot; /* -1: not yet */
    int has_hex;
    uint8_t bytes[TW_KEY_BYTES];
} host_entry;

static int put_key(host_world *world, host_entry *entry)
{
    if (entry->slot < 0 || !entry->has_hex) {
        return 0;
    }
    memcpy(world->key_bytes[entry->slot], entry->bytes, TW_KEY_BYTES);
    world->keys.keys[entry->slot] = world->key_bytes[entry->slot];
    return 1;
}

/* One line of the file; 0 where it is none of those that there are. */
static int key_line(host_world *world, char *text, host_entry *entry, int *entries, int *sending)
{
    char *value = NULL;
    if (*text == 0) {
        return 1;
    }
    if (strcmp(text, "[[key]]") == 0) {
        if (*entries > 0 && !put_key(world, entry)) {
            return 0;
        }
        *entries += 1;
        entry->slot = -1;
        entry->has_hex = 0;
        return 1;
    }
    if ((value = value_of(text, "sending_slot")) != NULL && *entries == 0 && is_slot(value)) {
        *sending = value[0] - '0';
        return 1;
    }
    if ((value = value_of(text, "slot")) != NULL && *entries > 0 && is_slot(value)) {
        entry->slot = value[0] - '0';
        return 1;
    }
    if ((value = value_of(text, "hex")) != NULL && *entries > 0) {
        return entry->has_hex = read_hex(value, entry->bytes);
    }
    return 0;
}

int read_keys(host_world *world)
{
    const char *path = world->options.keys;
    char text[512];
    host_entry entry = {-1, 0, {0}};
    int entries = 0, sending = -1, good = 1;
    if (path == NULL) {
        return 1;
    }
    FILE *file = fopen(path, "r");
    if (file == NULL) {
        return wrong(path, strerror(errno));
    }
    while (good && fgets(text, sizeof text, file)) {
        good = key_line(world, trimmed(text), &entry, &entries, &sending);
    }
    (void)fclose(file);
    good = good && entries > 0 && put_key(world, &entry);
    if (sending < 0 && entries == 1) {
        sending = entry.slot;
    }
    if (!good || sending < 0 || world->keys.keys[sending] == NULL) {
        return wrong(path, "no key file: sending_slot = N, [[key]], slot = N, hex = \"64 digits\"");
    }
    world->keys.sending_slot = (uint8_t)sending;
    return 1;
}

int open_files(host_world *world)
{
    const host_options *options = &world->options;
    world->store = -1;
    if (options->store != NULL) {
        world->store = open(options->store, O_RDWR | O_CREAT, 0600);
        if (world->store < 0) {
            return wrong(options->store, strerror(errno));
        }
    }
    if (options->tally != NULL) {
        world->tally = fopen(options->tally, "a");
        if (world->tally == NULL) {
            return wrong(options->tally, strerror(errno));
        }
    }
    return 1;
}

static off_t place_of(unsigned place, uint8_t copy)
{
    return (off_t)(place * 2u + copy) * TW_KEPT_BYTES;
}

int load_kept(host_world *world, unsigned place, uint8_t copy, uint8_t *bytes)
{
    return world->store >= 0 &&
           pread(world->store, bytes, TW_KEPT_BYTES, place_of(place, copy)) == TW_KEPT_BYTES;
}

int save_kept(host_world *world, unsigned place, uint8_t copy, const uint8_t *bytes)
{
    if (world->store < 0) {
        return 1; /* kept as long as the program runs */
    }
    return pwrite(world->store, bytes, TW_KEPT_BYTES, place_of(place, copy)) == TW_KEPT_BYTES &&
           fsync(world->store) == 0;
}

void count_command(host_world *world, const host_box *box, uint8_t code, uint16_t number)
{
    static const char *const words[] = {"pivot", "spin",  "rest",   "flash", "hop",
                                        "twist", "lock",  "unlock", "set"};
    if (world->tally == NULL) {
        return;
    }
    uint64_t identity = 0;
    for (size_t at = sizeof box->plate.identity; at > 0; at--) {
        identity = identity << 8 | box->plate.identity[at - 1];
    }
    const int said =
        fprintf(world->tally,
                "{\"identity\": \"%016llx\", \"boot\": %lu, \"number\": %u, \"time_ns\": %llu, "
                "\"name\": \"%.12s\", \"motion\": \"%s\"}\n",
                (unsigned long long)identity, (unsigned long)box->module.memory.boot,
                (unsigned)number, (unsigned long long)(now_ns() - world->start_ns),
                (const char *)box->plate.name, words[code - TW_CODE_PIVOT]);
    if (said < 0 || fflush(world->tally) != 0 || fsync(fileno(world->tally)) != 0) {
        fprintf(stderr, "tw_host: the tally cannot be written: %s\n", strerror(errno));
        exit(1);
    }
}
