/* Payloads: numbers in them, and whether one is a message that a module hears.
 *
 * Owns the way from bytes to numbers, and the lengths of requests. Offsets and codes come from
 * tw_wire.h. Knows no meaning.
 */
#ifndef TW_MESSAGE_H
#define TW_MESSAGE_H

#include <stdint.h>

#include "tw_wire.h"

/* Little-endian numbers; unaligned as they come. */
uint16_t tw_get16(const uint8_t *at);
uint32_t tw_get32(const uint8_t *at);
void tw_put16(uint8_t *at, uint16_t value);
void tw_put32(uint8_t *at, uint32_t value);

/* 1 where a payload is of this wire version, unsealed, has a code that a console sends to a
 * module, and exactly its length. All else is dropped. */
uint8_t tw_is_request(const uint8_t *payload, uint8_t length);

/* How long until then, both in milliseconds modulo 2^32; 0 once it is reached or past. */
uint32_t tw_until(uint32_t then_ms, uint32_t now_ms);

#endif
