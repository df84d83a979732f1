#include "tw_memory.h"

#include <string.h>

/* Offsets in a payload, from WIRE.md. */
enum {
    AT_VERSION = 0,
    AT_CODE = 1,
    AT_DESTINATION = 2,
    AT_SOURCE = 4,
    AT_EPOCH = 6,
    AT_BOOT = 10,
    AT_NUMBER = 14,
    AT_IDENTITY_BITS = 16,
    AT_REST = 16,
    AT_STATE = 16,
    AT_REASON = 17,
    AT_EXPECT_MS = 18,
    ENVELOPE_END = 18,
    QUERY_BYTES = 16,
    ANSWER_BYTES = 20
};

static uint16_t get16(const uint8_t *at)
{
    return (uint16_t)(at[0] | (uint16_t)(at[1] << 8));
}

static uint32_t get32(const uint8_t *at)
{
    return (uint32_t)get16(at) | (uint32_t)get16(at + 2) << 16;
}

/* RFC 1982 section 3.2 with 16 bits; exactly half the space apart, neither is newer. */
static uint8_t is_newer(uint16_t number, uint16_t than)
{
    const uint16_t ahead = (uint16_t)(number - than);
    return ahead > 0u && ahead < 0x8000u;
}

static uint8_t has_passed(const tw_memory *memory, uint16_t number)
{
    return memory->any && !is_newer(number, memory->newest);
}

static const tw_reply *find(const tw_memory *memory, uint16_t number)
{
    for (uint8_t place = 0; place < TW_REPLIES; place++) {
        if (memory->replies[place].length > 0u && memory->replies[place].number == number) {
            return &memory->replies[place];
        }
    }
    return NULL;
}

/* Make a number the newest; drop replies that are now more than half the space behind, lest they
 * answer for another command after a wrap. */
static void take(tw_memory *memory, uint16_t number)
{
    memory->newest = number;
    memory->any = 1;
    for (uint8_t place = 0; place < TW_REPLIES; place++) {
        if (!is_newer(number, memory->replies[place].number)) {
            memory->replies[place].length = 0;
        }
    }
}

uint8_t tw_memory_roll_call(tw_memory *memory, uint32_t epoch)
{
    if (epoch <= memory->epoch) {
        return 0;
    }
    memory->epoch = epoch;
    memory->any = 0;
    memset(memory->replies, 0, sizeof memory->replies);
    return 1;
}

/* Header of a reply to payload, and the epoch, boot and number as they came in it. */
static void begin_reply(const uint8_t *payload, uint8_t code, uint8_t *reply)
{
    reply[AT_VERSION] = 1u;
    reply[AT_CODE] = code;
    memcpy(reply + AT_DESTINATION, payload + AT_SOURCE, 2);
    memcpy(reply + AT_SOURCE, payload + AT_DESTINATION, 2);
    memcpy(reply + AT_EPOCH, payload + AT_EPOCH, AT_REST - AT_EPOCH);
}

uint8_t tw_write_answer(const uint8_t *payload, tw_state state, tw_reason reason,
                        uint16_t expect_ms, uint8_t reply[TW_REPLY_BYTES])
{
    begin_reply(payload, TW_ANSWER, reply);
    reply[AT_STATE] = (uint8_t)state;
    reply[AT_REASON] = (uint8_t)reason;
    reply[AT_EXPECT_MS] = (uint8_t)expect_ms;
    reply[AT_EXPECT_MS + 1] = (uint8_t)(expect_ms >> 8);
    return ANSWER_BYTES;
}

static tw_reason envelope_fault(const tw_memory *memory, const uint8_t *payload)
{
    if (get16(payload + AT_IDENTITY_BITS) != memory->identity_bits) {
        return TW_REASON_OTHER_IDENTITY;
    }
    if (get32(payload + AT_BOOT) != memory->boot) {
        return TW_REASON_OTHER_BOOT;
    }
    if (get32(payload + AT_EPOCH) != memory->epoch) {
        return TW_REASON_OTHER_EPOCH;
    }
    return get16(payload + AT_NUMBER) == 0u ? TW_REASON_BAD_FIELD : TW_REASON_NONE;
}

static uint8_t again(const uint8_t *payload, const tw_reply *remembered, uint8_t *reply)
{
    begin_reply(payload, remembered->code, reply);
    memcpy(reply + AT_REST, remembered->rest, remembered->length);
    return (uint8_t)(AT_REST + remembered->length);
}

uint8_t tw_memory_judge(tw_memory *memory, const uint8_t *payload, uint8_t payload_length,
                        uint8_t reply[TW_REPLY_BYTES], uint8_t *length)
{
    *length = 0;
    if (payload_length < ENVELOPE_END) {
        return 0;
    }
    const uint16_t number = get16(payload + AT_NUMBER);
    tw_reason reason = envelope_fault(memory, payload);
    const tw_reply *remembered = reason == TW_REASON_NONE ? find(memory, number) : NULL;
    if (remembered != NULL) {
        *length = again(payload, remembered, reply);
        return 0;
    }
    if (reason == TW_REASON_NONE && has_passed(memory, number)) {
        reason = TW_REASON_NUMBER_PASSED;
    }
    if (reason != TW_REASON_NONE) {
        *length = tw_write_answer(payload, TW_STATE_REFUSED, reason, 0, reply);
        return 0;
    }
    take(memory, number);
    return 1;
}

uint8_t tw_memory_query(tw_memory *memory, const uint8_t *payload, uint8_t payload_length,
                        uint8_t reply[TW_REPLY_BYTES])
{
    if (payload_length < QUERY_BYTES) {
        return 0;
    }
    const uint16_t number = get16(payload + AT_NUMBER);
    if (get32(payload + AT_BOOT) != memory->boot) {
        return tw_write_answer(payload, TW_STATE_UNKNOWN, TW_REASON_OTHER_BOOT, 0, reply);
    }
    if (get32(payload + AT_EPOCH) != memory->epoch) {
        return tw_write_answer(payload, TW_STATE_UNKNOWN, TW_REASON_OTHER_EPOCH, 0, reply);
    }
    const tw_reply *remembered = find(memory, number);
    if (remembered != NULL) {
        return again(payload, remembered, reply);
    }
    if (number != 0u && !has_passed(memory, number)) {
        take(memory, number); /* so that "unknown" is final */
    }
    return tw_write_answer(payload, TW_STATE_UNKNOWN, TW_REASON_NONE, 0, reply);
}

void tw_memory_remember(tw_memory *memory, uint16_t number, const uint8_t *reply, uint8_t length)
{
    if (length <= AT_REST || length > TW_REPLY_BYTES || !has_passed(memory, number) ||
        get32(reply + AT_EPOCH) != memory->epoch || get32(reply + AT_BOOT) != memory->boot) {
        return;
    }
    uint8_t place = 0;
    while (place < TW_REPLIES &&
           (memory->replies[place].length == 0u || memory->replies[place].number != number)) {
        place++;
    }
    if (place == TW_REPLIES) { /* a new one: the oldest goes */
        place = memory->next;
        memory->next = (uint8_t)((memory->next + 1u) % TW_REPLIES);
    }
    memcpy(memory->replies[place].rest, reply + AT_REST, (size_t)(length - AT_REST));
    memory->replies[place].length = (uint8_t)(length - AT_REST);
    memory->replies[place].code = reply[AT_CODE];
    memory->replies[place].number = number;
}
