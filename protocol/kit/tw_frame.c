#include "tw_frame.h"

#define CHECK_BYTES 4u

uint32_t tw_crc32c(const uint8_t *data, uint8_t length)
{
    /* Bit by bit: a table of 1 KiB would cost more flash than a small module has to spare, and a
     * frame of 62 bytes takes 500 rounds, well below its time on the air. */
    uint32_t value = 0xFFFFFFFFu;
    for (uint8_t at = 0; at < length; at++) {
        value ^= data[at];
        for (uint8_t bit = 0; bit < 8u; bit++) {
            value = (value & 1u) ? (value >> 1) ^ 0x82F63B78u : value >> 1;
        }
    }
    return value ^ 0xFFFFFFFFu;
}

/* Take the stuffing off (Cheshire and Baker 1999). Returns 1, or 0 where it is bad. */
static uint8_t unstuff(const uint8_t *piece, uint8_t length, uint8_t *out, uint8_t *out_length)
{
    uint8_t at = 0;
    uint8_t written = 0;
    while (at < length) {
        const uint8_t code = piece[at];
        if (code == 0u || code > length - at) {
            return 0;
        }
        for (uint8_t run = 1; run < code; run++) {
            out[written++] = piece[at + run];
        }
        at = (uint8_t)(at + code);
        if (at < length) {
            out[written++] = 0u;
        }
    }
    *out_length = written;
    return 1;
}

static uint32_t little_endian(const uint8_t *bytes)
{
    return (uint32_t)bytes[0] | (uint32_t)bytes[1] << 8 | (uint32_t)bytes[2] << 16 |
           (uint32_t)bytes[3] << 24;
}

static tw_found end_of_piece(const tw_reader *reader, uint8_t *payload, uint8_t *length)
{
    uint8_t body = 0;
    if (reader->overflow) {
        return TW_TOO_LONG;
    }
    if (!unstuff(reader->held, reader->length, payload, &body)) {
        return TW_BAD_STUFFING;
    }
    if (body <= CHECK_BYTES) {
        return TW_TOO_SHORT;
    }
    body = (uint8_t)(body - CHECK_BYTES);
    if (tw_crc32c(payload, body) != little_endian(payload + body)) {
        return TW_DAMAGED;
    }
    *length = body;
    return TW_PAYLOAD;
}

tw_found tw_read_byte(tw_reader *reader, uint8_t byte, uint8_t payload[TW_MAX_STUFFED],
                      uint8_t *length)
{
    tw_found found = TW_NOTHING;
    if (byte != 0u) {
        if (reader->length < TW_MAX_STUFFED) {
            reader->held[reader->length++] = byte;
        } else {
            reader->overflow = 1;
        }
        return TW_NOTHING;
    }
    if (reader->length > 0u) {
        found = end_of_piece(reader, payload, length);
    }
    reader->length = 0;
    reader->overflow = 0;
    return found;
}

uint8_t tw_write_frame(const uint8_t *payload, uint8_t length, uint8_t frame[TW_MAX_FRAME])
{
    if (length == 0u || length > TW_MAX_PAYLOAD) {
        return 0;
    }
    const uint32_t check = tw_crc32c(payload, length);
    uint8_t code_at = 0;
    uint8_t written = 1;
    for (uint8_t at = 0; at < length + CHECK_BYTES; at++) {
        const uint8_t byte =
            at < length ? payload[at] : (uint8_t)(check >> (8u * (uint32_t)(at - length)));
        if (byte == 0u) {
            frame[code_at] = (uint8_t)(written - code_at);
            code_at = written++;
        } else {
            frame[written++] = byte;
        }
    }
    frame[code_at] = (uint8_t)(written - code_at);
    frame[written++] = 0u;
    return written;
}
