/* The seal: HMAC-SHA-256 cut to 8 bytes, counters, the replay window, and freshness after a start
 * (WIRE.md, "Seal").
 *
 * Owns the tag and what is remembered of the console that is followed. Keys are in the caller's
 * memory. The rule for power loss is kept by tw_store: a new boot number is stored before the
 * first frame of that boot.
 */
#ifndef TW_SEAL_H
#define TW_SEAL_H

#include <stdint.h>

#include "tw_message.h"

#define TW_KEY_BYTES 32u
#define TW_SLOTS 8u
#define TW_TAG_BYTES 8u
#define TW_SEAL_BYTES 16u
#define TW_MAX_SEALED (TW_MAX_UNSEALED + 16)
#define TW_MAX_COVERED (TW_MAX_UNSEALED + 8)

/* The tag over at most TW_MAX_COVERED bytes: the first 8 bytes of HMAC-SHA-256 (RFC 2104, FIPS 180-4), laid by
 * exclusive or upon the 8 bytes behind them. Zeros become the tag; the right tag becomes zeros.
 * Returns 0 where it did, and takes the same time wherever it did not. */
uint8_t tw_tag(const uint8_t key[TW_KEY_BYTES], uint8_t *covered, uint8_t length);

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
    TW_NOT_FRESH,
    TW_OTHER_OPENING,
    TW_NO_MESSAGE
} tw_verdict;

/* A counter: its sender's opening, and its count. A module's own opening is its boot number. */
typedef struct {
    uint32_t opening;
    uint32_t count;
} tw_counter;

/* The module's gate for what comes from the console. Zero it, set boot, at each start. The window
 * is that of one opening, the epoch followed, so it keeps the lower half of counters only. */
typedef struct {
    uint32_t boot;
    uint32_t epoch;
    uint32_t edge;
    uint8_t proven; /* 1: the console has shown that it knows this boot */
    uint64_t seen;  /* bit n: edge - n was seen */
} tw_gate;

/* The module follows this epoch from now on; another one than before must prove itself. */
void tw_gate_follow(tw_gate *gate, uint32_t epoch);

/* Check a seal and take it off, where the payload stands. On TW_OBEYED *length is that of the
 * unsealed payload, and its counter stands behind it; nothing is said of its being new. */
tw_verdict tw_open(const tw_keys *keys, uint8_t *payload, uint8_t *length);

/* Check a seal, take it off, and say whether the payload is a request that is obeyed now. */
tw_verdict tw_gate_admit(tw_gate *gate, const tw_keys *keys, uint8_t *payload, uint8_t *length);

/* Seal a payload of at most TW_MAX_UNSEALED bytes where it stands; there are 16 bytes of room
 * behind it. Returns the length, 0 where it cannot be: too long, no key in the sending slot, or
 * the opening's counters are used up. */
uint8_t tw_seal(const tw_keys *keys, tw_counter *counter, uint8_t *payload, uint8_t length);

#endif
