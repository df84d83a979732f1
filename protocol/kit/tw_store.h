/* What a module keeps over restarts and power losses (WIRE.md, "Seal", the rule for power loss).
 *
 * Owns one record: boot number, all-stop and its latch, a person's lock, settings. Two copies of
 * it lie in non-volatile memory, each with a check, and are written in turn; at the start the
 * whole one with the greater count is taken. So a power loss while one is written leaves the other
 * whole. Knows no messages; reading and writing are the board's.
 */
#ifndef TW_STORE_H
#define TW_STORE_H

#include <stdint.h>

#include "tw_wire.h"

#define TW_WRITABLE_SETTINGS 4u /* setting numbers 1 to 4 */

/* Where things stand in the record: counts and numbers little-endian, so that a record may be
 * carried from one board to another. */
enum {
    TW_KEPT_COUNT = 0,
    TW_KEPT_BOOT = 4,
    TW_KEPT_STOP_NUMBER = 8,
    TW_KEPT_LATCHED = 12, /* behind its number, so that both are stored at once */
    TW_KEPT_SETTINGS = 13,
    TW_KEPT_PERSON = 29,
    TW_KEPT_CHECK = 41,
    TW_KEPT_BYTES = 45
};

/* Read or write a whole copy, 0 or 1; return 1 where that was done. A write returns only once the
 * bytes are safe. */
typedef struct {
    uint8_t (*load)(void *context, uint8_t copy, uint8_t bytes[TW_KEPT_BYTES]);
    uint8_t (*save)(void *context, uint8_t copy, const uint8_t bytes[TW_KEPT_BYTES]);
} tw_storage;

typedef struct {
    const tw_storage *storage;
    void *context;
    uint8_t unsaved; /* 1: the last write failed; the next one is made even if nothing changes */
    uint8_t record[TW_KEPT_BYTES];
} tw_store;

/* Read the record. Returns 1 where a copy was whole; else 0, and the record is all zeros. */
uint8_t tw_store_open(tw_store *store, const tw_storage *storage, void *context);

/* Change bytes of the record and store it, unless they are so already. Returns 1 where it is
 * stored; 0 where it is not: the record in memory has changed nevertheless. */
uint8_t tw_store_put(tw_store *store, uint8_t at, const uint8_t *bytes, uint8_t length);

/* The same for a number of 32 bits. */
uint8_t tw_store_put32(tw_store *store, uint8_t at, uint32_t value);

#endif
