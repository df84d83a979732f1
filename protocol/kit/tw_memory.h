/* Command memory: the module's side of "at most once" (WIRE.md, "The module: at most once").
 *
 * Owns what a module remembers of numbered commands: the epoch it follows, the newest number it
 * has seen, its last replies. Works on payloads as they stand on the wire. Zero the struct, set
 * boot and identity_bits, once at each start and never again. Whose epoch may be adopted is
 * tw_allegiance's.
 */
#ifndef TW_MEMORY_H
#define TW_MEMORY_H

#include <stdint.h>

#include "tw_message.h"

#define TW_REPLIES 8u
#define TW_REPLY_BYTES TW_LEN_FACTS /* the longest payload that is a reply to a command */
#define TW_REPLY_REST (TW_LEN_FACTS - TW_AT_FACTS_REASON) /* all of it behind the number */

/* A remembered reply. Addresses, epoch, boot and number are not kept: they follow from the memory
 * and from the command or query that asks again. */
typedef struct {
    uint16_t number;
    uint8_t code; /* Answer or Facts; 0: free */
    uint8_t rest[TW_REPLY_REST];
} tw_reply;

typedef struct {
    uint32_t boot;
    uint32_t epoch;
    uint16_t identity_bits;
    uint16_t newest;
    uint8_t any;  /* 1: a number was seen in this epoch */
    uint8_t next; /* the place that is used next: the oldest reply */
    tw_reply replies[TW_REPLIES];
} tw_memory;

/* Follow a console's epoch if it is newer, and forget all commands. Returns 1 if so. */
uint8_t tw_memory_adopt(tw_memory *memory, uint32_t epoch);

/* Judge a command that tw_is_request lets through. owned: the console that is followed still owns
 * the module. Returns 0 where it is fresh: carry it out, or refuse it for a reason of your own,
 * then tw_memory_remember. Else it is not to be carried out, and reply, of the length returned, is
 * what to send. */
uint8_t tw_memory_judge(tw_memory *memory, const uint8_t *payload, uint8_t owned,
                        uint8_t reply[TW_REPLY_BYTES]);

/* Answer a Query that tw_is_request lets through; never causes anything. Returns the reply's
 * length. */
uint8_t tw_memory_query(tw_memory *memory, const uint8_t *payload, uint8_t reply[TW_REPLY_BYTES]);

/* Keep an Answer or Facts, in place of an earlier one to its number. One that is not of this boot
 * and epoch, or whose number was never taken, is not kept. */
void tw_memory_remember(tw_memory *memory, const uint8_t *reply);

/* The oldest number whose remembered reply is an acceptance, its end still owed; 0: none. */
uint16_t tw_memory_accepted(const tw_memory *memory);

/* Fill in an Answer behind the number; returns its length. */
uint8_t tw_end_answer(uint8_t *reply, uint8_t state, uint8_t reason, uint16_t expect_ms);

#endif
