/* Frames: COBS, CRC-32C, delimiter. The module's side of WIRE.md, section "Frames".
 *
 * Owns the way from bytes to checked payloads and back. Knows no messages. No heap, no recursion,
 * no globals but constants; all memory is the caller's.
 */
#ifndef TW_FRAME_H
#define TW_FRAME_H

#include <stdint.h>

#define TW_MAX_PAYLOAD 58u /* 62 less the check */
#define TW_MAX_STUFFED 63u /* payload and check, stuffed, without the delimiter */
#define TW_MAX_FRAME 64u   /* and with it */

/* What one byte completed. */
typedef enum {
    TW_NOTHING = 0, /* no frame ends here */
    TW_PAYLOAD,     /* a checked payload */
    TW_DAMAGED,     /* the check failed */
    TW_BAD_STUFFING,
    TW_TOO_LONG,
    TW_TOO_SHORT
} tw_found;

/* A reader of one stream. Zero it before use; that is also how it forgets a piece begun. A whole
 * payload stands at the start of held, until the next byte is read. */
typedef struct {
    uint8_t held[TW_MAX_STUFFED];
    uint8_t length;
    uint8_t overflow; /* 1: the piece is longer than any frame, and only skipped */
} tw_reader;

/* CRC-32C (RFC 3720 section 12.1) of some bytes. */
uint32_t tw_crc32c(const uint8_t *data, uint8_t length);

/* Take one byte. Where TW_PAYLOAD is returned, reader->held and *length hold it: it is unstuffed
 * where it stands, so that one buffer serves. */
tw_found tw_read_byte(tw_reader *reader, uint8_t byte, uint8_t *length);

/* Make a frame where it stands: a payload of 1 to TW_MAX_PAYLOAD bytes lies at frame + 1. Returns
 * the frame's length, delimiter included; 0 where the payload has none of these lengths. */
uint8_t tw_write_frame(uint8_t frame[TW_MAX_FRAME], uint8_t length);

#endif
