/* Runs vectors: lines on standard input, one step each, as tests/support/vector_lines.py prints
 * them. Prints how many passed; exits with 1 where one failed, or where there were none. Being a
 * test on a host, it may use the standard library as it likes. */
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

#include "check.h"

int bytes_of(const char *hex, uint8_t *out, size_t *length)
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
static const char *const verdicts[] = {"obeyed",   "unsealed",  "too_short",     "unknown_slot",
                                       "forged",   "repeated",  "too_old",       "not_fresh",
                                       "other_opening", "no_message"};

static tw_memory memory;
static tw_gate gate;
static tw_keys keys;
static uint8_t key[MOST];

int same(const uint8_t *left, size_t n, const char *hex)
{
    size_t at = 0;
    if (strcmp(hex, "-") == 0) {
        return n == 0;
    }
    for (; at < n && hex[0] && hex[1]; at++, hex += 2) {
        char digits[3];
        (void)snprintf(digits, sizeof digits, "%02x", (unsigned)left[at]);
        if (strncmp(hex, "**", 2) != 0 && strncmp(hex, digits, 2) != 0) {
            return 0;
        }
    }
    return at == n && *hex == 0;
}

uint32_t number_of(const char *word)
{
    return (uint32_t)strtoul(word, NULL, 10);
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
    uint8_t data[MOST], length = 0;
    size_t n = 0;
    tw_reader reader = {{0}, 0, 0};
    char **expected = w + 2;
    if (!bytes_of(w[1], data, &n)) {
        return 0;
    }
    for (size_t at = 0; at < n; at++) {
        const tw_found found = tw_read_byte(&reader, data[at], &length);
        if (found == TW_NOTHING) {
            continue;
        }
        if (*expected == NULL || (found == TW_PAYLOAD ? !same(reader.held, length, *expected)
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
    if (!bytes_of(w[1], payload, &n) || n > TW_MAX_PAYLOAD) {
        return 0;
    }
    memcpy(frame + 1, payload, n);
    return same(frame, tw_write_frame(frame, (uint8_t)n), w[2]);
}

/* request PAYLOAD 1|0: whether a module takes it for one */
static int run_request(char **w)
{
    uint8_t payload[MOST];
    size_t n = 0;
    return bytes_of(w[1], payload, &n) && tw_is_request(payload, (uint8_t)n) == (w[2][0] == '1');
}

/* memory BOOT BITS: a fresh one */
static int run_memory(char **w)
{
    memset(&memory, 0, sizeof memory);
    memory.boot = number_of(w[1]);
    memory.identity_bits = (uint16_t)number_of(w[2]);
    return 1;
}

/* judges PAYLOAD OWNED FRESH REPLY; what is fresh is finished at once */
static int run_judges(char **w)
{
    uint8_t payload[MOST], reply[TW_REPLY_BYTES] = {0}, length = 0, fresh = 0;
    size_t n = 0;
    if (!bytes_of(w[1], payload, &n) || !tw_is_request(payload, (uint8_t)n)) {
        return 0;
    }
    if (payload[1] == TW_CODE_ROLL_CALL) {
        (void)tw_memory_adopt(&memory, tw_get32(payload + TW_AT_ROLL_CALL_EPOCH));
    } else if (payload[1] == TW_CODE_QUERY) {
        length = tw_memory_query(&memory, payload, reply);
    } else {
        length = tw_memory_judge(&memory, payload, w[2][0] == '1', reply);
        fresh = length == 0u;
        if (fresh) { /* the judge has written down whose reply it is */
            length = tw_end_answer(reply, TW_STATE_FINISHED, TW_REASON_NONE, 0);
            tw_memory_remember(&memory, reply);
        }
    }
    return fresh == (w[3][0] == '1') && same(reply, length, w[4]);
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
    uint8_t payload[MOST], sealed[TW_MAX_SEALED];
    size_t n = 0;
    tw_counter counter = {number_of(w[1]), 0};
    int good = bytes_of(w[2], payload, &n) && n <= TW_MAX_UNSEALED;
    for (char **expected = w + 3; good && *expected; expected++) {
        memcpy(sealed, payload, n);
        good = same(sealed, tw_seal(&keys, &counter, sealed, (uint8_t)n), *expected);
    }
    return good;
}

/* open PAYLOAD VERDICT */
static int run_open(char **w)
{
    uint8_t payload[MOST];
    size_t n = 0;
    if (!bytes_of(w[1], payload, &n)) {
        return 0;
    }
    uint8_t length = (uint8_t)n;
    return strcmp(verdicts[tw_open(&keys, payload, &length)], w[2]) == 0;
}

/* gate BOOT: just started */
static int run_gate(char **w)
{
    memset(&gate, 0, sizeof gate);
    gate.boot = number_of(w[1]);
    return 1;
}

/* admit EPOCH PAYLOAD VERDICT: it follows that epoch as it hears the payload */
static int run_admit(char **w)
{
    uint8_t payload[MOST];
    size_t n = 0;
    if (!bytes_of(w[2], payload, &n)) {
        return 0;
    }
    uint8_t length = (uint8_t)n;
    tw_gate_follow(&gate, number_of(w[1]));
    return strcmp(verdicts[tw_gate_admit(&gate, &keys, payload, &length)], w[3]) == 0;
}

static const struct {
    const char *word;
    int (*run)(char **words);
    int words;
} runners[] = {{"crc", run_crc, 3},         {"frame", run_frame, 2},
               {"write", run_write, 3},     {"request", run_request, 3},
               {"memory", run_memory, 3},   {"judges", run_judges, 5},
               {"key", run_key, 2},         {"seal", run_seal, 3},
               {"open", run_open, 3},       {"gate", run_gate, 2},
               {"admit", run_admit, 4},     {"allegiance", run_allegiance, 1},
               {"follows", run_follows, 7}, {"module", run_module, 4},
               {"hears", run_hears, 3},     {"stops", run_stops, 4},
               {"store", run_store, 1},     {"tears", run_tears, 5},
               {"trace", run_trace, 6},     {"notices", run_notices, 3},
               {"sticks", run_sticks, 1},   {"reports", run_reports, 3}};

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
