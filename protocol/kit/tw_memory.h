/* Command memory: the module's side of "at most once" (WIRE.md, "The module: at most once").
 *
 * Owns what a module remembers of numbered commands: the epoch it follows, the newest number it
 * has seen, its last replies. Works on payloads as they stand on the wire. Zero the struct, set
 * boot and identity_bits, once at each start and never again.
 */
#ifndef TW_MEMORY_H
#define TW_MEMORY_H

#include <stdint.h>

#define TW_REPLIES 16u
#define TW_REPLY_BYTES 38u /* the longest payload that is a reply to a command: Facts */
#define TW_REPLY_REST 22u  /* what of it is not known otherwise: all behind the number */

enum { TW_ROLL_CALL = 0x01, TW_QUERY = 0x02, TW_ANSWER = 0x84 };

typedef enum {
    TW_STATE_ACCEPTED = 1,
    TW_STATE_REFUSED,
    TW_STATE_FINISHED,
    TW_STATE_CUT,
    TW_STATE_UNKNOWN
} tw_state;

typedef enum {
    TW_REASON_NONE = 0,
    TW_REASON_OTHER_BOOT = 1,
    TW_REASON_OTHER_EPOCH = 2,
    TW_REASON_OTHER_IDENTITY = 3,
    TW_REASON_NUMBER_PASSED = 4,
    TW_REASON_BAD_FIELD = 14
} tw_reason;

/* A remembered reply. Addresses, epoch, boot and number are not kept: they follow from the memory
 * and from the command or query that asks again. */
typedef struct {
    uint8_t rest[TW_REPLY_REST];
    uint8_t length; /* of rest; 0: free */
    uint8_t code;
    uint16_t number;
} tw_reply;

typedef struct {
    uint32_t boot;
    uint16_t identity_bits;
    uint32_t epoch;
    uint16_t newest;
    uint8_t any; /* 1: a number was seen in this epoch */
    uint8_t next; /* the place that is used next: the oldest reply */
    tw_reply replies[TW_REPLIES];
} tw_memory;

/* Hear a console's epoch; adopt it if it is newer, and forget all commands. Returns 1 if so. */
uint8_t tw_memory_roll_call(tw_memory *memory, uint32_t epoch);

/* Judge a command's payload (its first 12 body bytes are the envelope). Returns 1 where it is
 * fresh: carry it out, or refuse it for a reason of your own, then tw_memory_remember. Returns 0
 * where it is not to be carried out; reply and *length are then what to send. length is the
 * payload's own; a payload too short for an envelope gives 0 and *length 0: send nothing. */
uint8_t tw_memory_judge(tw_memory *memory, const uint8_t *payload, uint8_t payload_length,
                        uint8_t reply[TW_REPLY_BYTES], uint8_t *length);

/* Answer a Query's payload; never causes anything. Returns the reply's length, 0: send nothing. */
uint8_t tw_memory_query(tw_memory *memory, const uint8_t *payload, uint8_t payload_length,
                        uint8_t reply[TW_REPLY_BYTES]);

/* Keep the reply to a number, in place of an earlier one to the same. One that is not of this
 * boot and epoch, or whose number was never taken, is not kept. */
void tw_memory_remember(tw_memory *memory, uint16_t number, const uint8_t *reply, uint8_t length);

/* Write an Answer about the command or query in payload; returns its length. */
uint8_t tw_write_answer(const uint8_t *payload, tw_state state, tw_reason reason,
                        uint16_t expect_ms, uint8_t reply[TW_REPLY_BYTES]);

#endif
