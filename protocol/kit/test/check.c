/* Runs vectors: lines on standard input, one step each, as tests/support/vector_lines.py prints
 * them. Prints how many passed; exits with 1 where one failed, or where there were none. Being a
 * test on a host, it may use the standard library as it likes. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "../tw_frame.h"
#include "../tw_memory.h"
#include "../tw_seal.h"

#define MOST 4096

static uint8_t bytes_of(const char *hex, uint8_t *out, size_t *length)
{
    *length = 0;
    if (strcmp(hex, "-") == 0) {
        return 1;
    }
    for (; hex[0] && hex[1]; hex += 2) {
        unsigned value = 0;
        if (sscanf(hex, "%2x", &value) != 1 || *length >= MOST) {
            return 0;
        }
        out[(*length)++] = (uint8_t)value;
    }
    return 1;
}

static const char *const drops[] = {"", "payload", "check_failed", "bad_stuffing", "too_long",
                                    "too_short"};
static const char *const verdicts[] = {"obeyed",  "unsealed", "too_short", "unknown_slot",
                                       "forged",  "repeated", "too_old",   "not_fresh"};

static tw_memory memory;
static tw_gate gate;
static tw_keys keys;
static uint8_t key[MOST];

static int same(const uint8_t *left, size_t n, const char *hex)
{
    uint8_t right[MOST];
    size_t length = 0;
    return bytes_of(hex, right, &length) && n == length && memcmp(left, right, n) == 0;
}

/* crc HEX VALUE */
static int run_crc(char **w)
{
    uint8_t data[MOST];
    size_t n = 0;
    return bytes_of(w[1], data, &n) &&
           tw_crc32c(data, (uint8_t)n) == (uint32_t)strtoul(w[2], NULL, 16);
}

/* frame HEX PIECE...; a piece is a payload in hexadecimal, or a reason of drop */
static int run_frame(char **w)
{
    uint8_t data[MOST], payload[TW_MAX_STUFFED], length = 0;
    size_t n = 0;
    tw_reader reader = {{0}, 0, 0};
    char **expected = w + 2;
    if (!bytes_of(w[1], data, &n)) {
        return 0;
    }
    for (size_t at = 0; at < n; at++) {
        const tw_found found = tw_read_byte(&reader, data[at], payload, &length);
        if (found == TW_NOTHING) {
            continue;
        }
        if (*expected == NULL || (found == TW_PAYLOAD ? !same(payload, length, *expected)
                                                      : strcmp(drops[found], *expected) != 0)) {
            return 0;
        }
        expected++;
    }
    return *expected == NULL;
}

/* write PAYLOAD FRAME */
static int run_write(char **w)
{
    uint8_t payload[MOST], frame[TW_MAX_FRAME];
    size_t n = 0;
    return bytes_of(w[1], payload, &n) &&
           same(frame, tw_write_frame(payload, (uint8_t)n, frame), w[2]);
}

/* memory BOOT BITS: a fresh one */
static int run_memory(char **w)
{
    memset(&memory, 0, sizeof memory);
    memory.boot = (uint32_t)strtoul(w[1], NULL, 10);
    memory.identity_bits = (uint16_t)strtoul(w[2], NULL, 10);
    return 1;
}

/* hears PAYLOAD FRESH REPLY; what is fresh is finished at once */
static int run_hears(char **w)
{
    uint8_t payload[MOST], reply[TW_REPLY_BYTES], length = 0, fresh = 0;
    size_t n = 0;
    if (!bytes_of(w[1], payload, &n) || n < 10) {
        return 0;
    }
    if (payload[1] == TW_ROLL_CALL) {
        (void)tw_memory_roll_call(&memory, (uint32_t)payload[6] | (uint32_t)payload[7] << 8 |
                                               (uint32_t)payload[8] << 16 |
                                               (uint32_t)payload[9] << 24);
    } else if (payload[1] == TW_QUERY) {
        length = tw_memory_query(&memory, payload, (uint8_t)n, reply);
    } else {
        fresh = tw_memory_judge(&memory, payload, (uint8_t)n, reply, &length);
        if (fresh) {
            length = tw_write_answer(payload, TW_STATE_FINISHED, TW_REASON_NONE, 0, reply);
            tw_memory_remember(&memory, (uint16_t)(payload[14] | payload[15] << 8), reply, length);
        }
    }
    return fresh == (uint8_t)(w[2][0] - '0') && same(reply, length, w[3]);
}

/* key HEX: in slot 0, and no other */
static int run_key(char **w)
{
    size_t n = 0;
    memset(&keys, 0, sizeof keys);
    keys.keys[0] = key;
    return bytes_of(w[1], key, &n) && n == TW_KEY_BYTES;
}

/* seal OPENING PAYLOAD SEALED... */
static int run_seal(char **w)
{
    uint8_t payload[MOST], sealed[TW_MAX_UNSEALED + TW_SEAL_BYTES];
    size_t n = 0;
    tw_counter counter = {(uint32_t)strtoul(w[1], NULL, 10), 0};
    int good = bytes_of(w[2], payload, &n);
    for (char **expected = w + 3; *expected; expected++) {
        good = good && same(sealed, tw_seal(&keys, &counter, payload, (uint8_t)n, sealed), *expected);
    }
    return good;
}

/* open PAYLOAD VERDICT */
static int run_open(char **w)
{
    uint8_t payload[MOST], plain[TW_MAX_UNSEALED], length = 0;
    uint64_t counter = 0;
    size_t n = 0;
    return bytes_of(w[1], payload, &n) &&
           strcmp(verdicts[tw_open(&keys, payload, (uint8_t)n, plain, &length, &counter)], w[2]) == 0;
}

/* gate BOOT: just started */
static int run_gate(char **w)
{
    memset(&gate, 0, sizeof gate);
    gate.boot = (uint32_t)strtoul(w[1], NULL, 10);
    return 1;
}

/* admit PAYLOAD VERDICT */
static int run_admit(char **w)
{
    uint8_t payload[MOST], plain[TW_MAX_UNSEALED], length = 0;
    size_t n = 0;
    return bytes_of(w[1], payload, &n) &&
           strcmp(verdicts[tw_gate_admit(&gate, &keys, payload, (uint8_t)n, plain, &length)],
                  w[2]) == 0;
}

static const struct {
    const char *word;
    int (*run)(char **words);
    int words;
} runners[] = {{"crc", run_crc, 3},       {"frame", run_frame, 2}, {"write", run_write, 3},
               {"memory", run_memory, 3}, {"hears", run_hears, 4}, {"key", run_key, 2},
               {"seal", run_seal, 3},     {"open", run_open, 3},   {"gate", run_gate, 2},
               {"admit", run_admit, 3}};

static int run_line(char *line)
{
    char *words[64] = {NULL};
    int count = 0;
    for (char *word = strtok(line, " \n"); word && count < 63; word = strtok(NULL, " \n")) {
        words[count++] = word;
    }
    for (size_t at = 0; count && at < sizeof runners / sizeof *runners; at++) {
        if (strcmp(words[0], runners[at].word) == 0 && count >= runners[at].words) {
            return runners[at].run(words);
        }
    }
    return 0;
}

int main(void)
{
    static char line[4 * MOST], copy[4 * MOST];
    int passed = 0, failed = 0;
    while (fgets(line, sizeof line, stdin)) {
        memcpy(copy, line, sizeof copy);
        if (run_line(line)) {
            passed++;
        } else {
            failed++;
            fprintf(stderr, "failed: %s", copy);
        }
    }
    printf("%d passed, %d failed\n", passed, failed);
    return failed || !passed;
}
