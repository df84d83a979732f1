/* Whole modules as a program on a computer: what its parts share.
 *
 * Owns the structs only. A world is a line, some files and boxes; a box is a module with a wheel
 * and a body made up for it. Nothing here is part of the kit.
 */
#ifndef HOST_H
#define HOST_H

#include <stdint.h>
#include <stdio.h>

#include "../tw_module.h"

enum { MOST_MODULES = 500, HELD_BYTES = 8192, MOST_PIECE = 256, SAMPLES = 240 };

typedef struct {
    int pty; /* 1: on a pseudo-terminal, 0: on standard input and output */
    unsigned modules;
    const char *name;
    const char *kind;
    uint16_t address;
    uint64_t identity; /* of the first; bit 63 is always set */
    uint64_t seed;
    const char *keys; /* files, or NULL */
    const char *store;
    const char *tally;
    double loss;
    double repeat;
} host_options;

/* Bytes to and from whoever is connected; neither ever blocks. */
typedef struct {
    int in, out;
    int slave; /* of the pseudo-terminal, kept open so that a reader may come and go; else -1 */
    uint8_t held[HELD_BYTES];
    size_t waiting;
    uint64_t moved_ns; /* when bytes last went out */
} host_line;

typedef struct {
    host_options options;
    tw_keys keys;
    uint8_t key_bytes[TW_SLOTS][TW_KEY_BYTES];
    int store; /* a file descriptor, or -1 */
    FILE *tally;
    host_line line;
    uint64_t random;
    uint64_t start_ns;
} host_world;

/* One turn of the body about an edge. */
typedef struct {
    double start_s, length_s;
    double peak_deg, end_deg; /* signed */
    int moving;
} host_tumble;

typedef struct {
    tw_module module;
    tw_plate plate;
    host_world *world;
    unsigned place;
    uint64_t random;
    double now_s;
    tw_wheel wheel;
    double goal_rpm, rpm, brake_rate;
    int face_up;
    double turned_deg; /* by tumbles that are over */
    host_tumble tumble;
    double used_mV, heat_C;
    tw_sample samples[SAMPLES];
} host_box;

/* options.c: read the command line; 0 where it is wrong, which it has then said. */
int read_options(int count, char **words, host_options *found);

/* files.c: each returns 1, or 0 where it cannot, which it has then said. */
int read_keys(host_world *world);
int open_files(host_world *world);
int load_kept(host_world *world, unsigned place, uint8_t copy, uint8_t *bytes);
int save_kept(host_world *world, unsigned place, uint8_t copy, const uint8_t *bytes);
void count_command(host_world *world, const host_box *box, uint8_t code, uint16_t number);

/* line.c */
int open_line(host_line *line, int pty);
/* Wait so long for bytes. Returns how many came, 0 for none, -1 where no more ever will. */
int read_line(host_line *line, uint8_t *bytes, size_t room, int wait_ms);
void write_line(host_line *line, const uint8_t *bytes, size_t length, uint64_t now_ns);
void flush_line(host_line *line, uint64_t now_ns);

/* box.c */
uint32_t draw_boot(void);
uint64_t now_ns(void);
double uniform(uint64_t *random); /* 0 to 1 */
void start_box(host_box *box, host_world *world, unsigned place);
void step_box(host_box *box, double step_s);

#endif
