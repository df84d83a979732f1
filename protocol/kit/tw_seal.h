/* The seal: HMAC-SHA-256 cut to 8 bytes, counters, the replay window, and freshness after a start
 * (WIRE.md, "Seal").
 *
 * Owns keys in the caller's memory and what is remembered of one sender, the console. The rule for
 * power loss is the caller's to keep: store a new boot number before the first frame of that boot.
 */
#ifndef TW_SEAL_H
#define TW_SEAL_H

#include <stdint.h>

#define TW_KEY_BYTES 32u
#define TW_SLOTS 8u
#define TW_TAG_BYTES 8u
#define TW_SEAL_BYTES 16u
#define TW_HEADER_BYTES 6u
#define TW_MAX_UNSEALED 42u

/* SHA-256 (FIPS 180-4) as a running sum. */
typedef struct {
    uint32_t state[8];
    uint8_t block[64];
    uint8_t filled;
    uint32_t blocks;
} tw_sha256;

void tw_sha256_begin(tw_sha256 *sum);
void tw_sha256_add(tw_sha256 *sum, const uint8_t *data, uint8_t length);
void tw_sha256_end(tw_sha256 *sum, uint8_t digest[32]);

/* The tag over some bytes: the first 8 bytes of HMAC-SHA-256 (RFC 2104). */
void tw_tag(const uint8_t key[TW_KEY_BYTES], const uint8_t *covered, uint8_t length,
            uint8_t tag[TW_TAG_BYTES]);

/* Keys by slot; keys[slot] may be NULL. */
typedef struct {
    const uint8_t *keys[TW_SLOTS];
    uint8_t sending_slot;
} tw_keys;

/* Why a payload is not obeyed. */
typedef enum {
    TW_OBEYED = 0,
    TW_UNSEALED,
    TW_SEAL_TOO_SHORT,
    TW_UNKNOWN_SLOT,
    TW_FORGED,
    TW_REPEATED,
    TW_TOO_OLD,
    TW_NOT_FRESH
} tw_verdict;

/* The module's gate for what comes from the console. Zero it, set boot, at each start. */
typedef struct {
    uint32_t boot;
    uint64_t edge;
    uint64_t seen; /* bit n: edge - n was seen */
    uint8_t proven; /* 1: the console has shown that it knows this boot */
} tw_gate;

/* The module's own counters. opening is the boot number. */
typedef struct {
    uint32_t opening;
    uint32_t count;
} tw_counter;

/* Check a seal. On TW_OBEYED plain and *plain_length hold the unsealed payload, *counter its
 * counter; nothing is said of its being new. Takes the same time wherever a tag differs. */
tw_verdict tw_open(const tw_keys *keys, const uint8_t *payload, uint8_t length,
                   uint8_t plain[TW_MAX_UNSEALED], uint8_t *plain_length, uint64_t *counter);

/* Check a seal and say whether the payload is obeyed now. */
tw_verdict tw_gate_admit(tw_gate *gate, const tw_keys *keys, const uint8_t *payload,
                         uint8_t length, uint8_t plain[TW_MAX_UNSEALED], uint8_t *plain_length);

/* Seal a payload of at most TW_MAX_UNSEALED bytes. Returns the length, 0 where it cannot be: too
 * long, no key in the sending slot, or the opening's counters are used up. */
uint8_t tw_seal(const tw_keys *keys, tw_counter *counter, const uint8_t *payload, uint8_t length,
                uint8_t sealed[TW_MAX_UNSEALED + TW_SEAL_BYTES]);

#endif
