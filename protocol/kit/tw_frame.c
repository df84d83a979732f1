#include "tw_frame.h"

#include "tw_message.h"

#define CHECK_BYTES 4u
#define GOOD_CHECK 0x48674BC7u

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

/* Take the stuffing off (Cheshire and Baker 1999), in place: what is written never overtakes what
 * is read. Returns how many bytes are left, 0xff where it is bad. */
static uint8_t unstuff(uint8_t *piece, uint8_t length)
{
    uint8_t at = 0;
    uint8_t written = 0;
    while (at < length) {
        const uint8_t code = piece[at];
        if (code == 0u || code > length - at) {
            return 0xFFu;
        }
        for (uint8_t run = 1; run < code; run++) {
            piece[written++] = piece[at + run];
        }
        at = (uint8_t)(at + code);
        if (at < length) {
            piece[written++] = 0u;
        }
    }
    return written;
}

static tw_found end_of_piece(tw_reader *reader, uint8_t *length)
{
    if (reader->overflow) {
        return TW_TOO_LONG;
    }
    const uint8_t whole = unstuff(reader->held, reader->length);
    if (whole == 0xFFu) {
        return TW_BAD_STUFFING;
    }
    if (whole <= CHECK_BYTES) {
        return TW_TOO_SHORT;
    }
    *length = (uint8_t)(whole - CHECK_BYTES);
    /* The check over payload and check is the same number for every good frame (WIRE.md). */
    return tw_crc32c(reader->held, whole) == GOOD_CHECK ? TW_PAYLOAD : TW_DAMAGED;
}

tw_found tw_read_byte(tw_reader *reader, uint8_t byte, uint8_t *length)
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
        found = end_of_piece(reader, length);
    }
    reader->length = 0;
    reader->overflow = 0;
    return found;
}

uint8_t tw_write_frame(uint8_t frame[TW_MAX_FRAME], uint8_t length)
{
    if (length == 0u || length > TW_MAX_PAYLOAD) {
        return 0;
    }
    tw_put32(frame + 1 + length, tw_crc32c(frame + 1, length));
    const uint8_t end = (uint8_t)(1u + length + CHECK_BYTES);
    uint8_t code_at = 0;
    for (uint8_t at = 1; at < end; at++) {
        if (frame[at] == 0u) {
            frame[code_at] = (uint8_t)(at - code_at);
            code_at = at;
        }
    }
    frame[code_at] = (uint8_t)(end - code_at);
    frame[end] = 0u;
    return (uint8_t)(end + 1u);
}
