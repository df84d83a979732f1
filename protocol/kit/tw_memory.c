#include "tw_memory.h"

#include <string.h>

/* Query, Answer and Facts name their command as the commands themselves do; by one name here. */
enum {
    AT_EPOCH = TW_AT_ANSWER_EPOCH,
    AT_BOOT = TW_AT_ANSWER_BOOT,
    AT_NUMBER = TW_AT_ANSWER_NUMBER,
    AT_REST = TW_AT_ANSWER_STATE
};

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

/* Where the reply to a number is; TW_REPLIES where it is not. */
static uint8_t find(const tw_memory *memory, uint16_t number)
{
    uint8_t place = 0;
    while (place < TW_REPLIES &&
           (memory->replies[place].code == 0u || memory->replies[place].number != number)) {
        place++;
    }
    return place;
}

/* Make a number the newest; drop replies that are now more than half the space behind, lest they
 * answer for another command after a wrap. */
static void take(tw_memory *memory, uint16_t number)
{
    memory->newest = number;
    memory->any = 1;
    for (uint8_t place = 0; place < TW_REPLIES; place++) {
        if (!is_newer(number, memory->replies[place].number)) {
            memory->replies[place].code = 0;
        }
    }
}

uint8_t tw_memory_adopt(tw_memory *memory, uint32_t epoch)
{
    if (epoch <= memory->epoch) {
        return 0;
    }
    memory->epoch = epoch;
    memory->any = 0;
    memset(memory->replies, 0, sizeof memory->replies);
    return 1;
}

uint8_t tw_end_answer(uint8_t *reply, uint8_t state, uint8_t reason, uint16_t expect_ms)
{
    reply[TW_AT_CODE] = TW_CODE_ANSWER;
    reply[TW_AT_ANSWER_STATE] = state;
    reply[TW_AT_ANSWER_REASON] = reason;
    tw_put16(reply + TW_AT_ANSWER_EXPECT_MS, expect_ms);
    return TW_LEN_ANSWER;
}

/* Header of a reply to payload, and the epoch, boot and number as they came in it. */
static void begin_reply(const uint8_t *payload, uint8_t *reply)
{
    reply[TW_AT_VERSION] = TW_WIRE_VERSION;
    memcpy(reply + TW_AT_DESTINATION, payload + TW_AT_SOURCE, 2);
    memcpy(reply + TW_AT_SOURCE, payload + TW_AT_DESTINATION, 2);
    memcpy(reply + AT_EPOCH, payload + AT_EPOCH, AT_REST - AT_EPOCH);
}

/* What is wrong with boot or epoch, which commands and queries have alike. */
static uint8_t name_fault(const tw_memory *memory, const uint8_t *payload)
{
    if (tw_get32(payload + AT_BOOT) != memory->boot) {
        return TW_REASON_OTHER_BOOT;
    }
    const uint32_t epoch = tw_get32(payload + AT_EPOCH); /* 0 is nobody's */
    return epoch == 0u || epoch != memory->epoch ? TW_REASON_OTHER_EPOCH : TW_REASON_NONE;
}

static uint8_t envelope_fault(const tw_memory *memory, const uint8_t *payload, uint8_t owned)
{
    if (tw_get16(payload + TW_AT_REST_IDENTITY_BITS) != memory->identity_bits) {
        return TW_REASON_OTHER_IDENTITY;
    }
    const uint8_t fault = name_fault(memory, payload);
    if (fault == TW_REASON_OTHER_EPOCH && owned) {
        return TW_REASON_OWNED;
    }
    if (fault == TW_REASON_NONE && tw_get16(payload + AT_NUMBER) == 0u) {
        return TW_REASON_BAD_FIELD;
    }
    return fault;
}

/* The reply at a place once more; begin_reply has been. */
static uint8_t again(const tw_reply *remembered, uint8_t *reply)
{
    const uint8_t length =
        remembered->code == TW_CODE_FACTS ? TW_LEN_FACTS : (uint8_t)TW_LEN_ANSWER;
    reply[TW_AT_CODE] = remembered->code;
    memcpy(reply + AT_REST, remembered->rest, (size_t)(length - AT_REST));
    return length;
}

uint8_t tw_memory_judge(tw_memory *memory, const uint8_t *payload, uint8_t owned,
                        uint8_t reply[TW_REPLY_BYTES])
{
    const uint16_t number = tw_get16(payload + AT_NUMBER);
    uint8_t reason = envelope_fault(memory, payload, owned);
    begin_reply(payload, reply);
    if (reason == TW_REASON_NONE) {
        const uint8_t place = find(memory, number);
        if (place < TW_REPLIES) {
            return again(&memory->replies[place], reply);
        }
        if (!has_passed(memory, number)) {
            take(memory, number);
            return 0;
        }
        reason = TW_REASON_NUMBER_PASSED;
    }
    return tw_end_answer(reply, TW_STATE_REFUSED, reason, 0);
}

uint8_t tw_memory_query(tw_memory *memory, const uint8_t *payload, uint8_t reply[TW_REPLY_BYTES])
{
    const uint16_t number = tw_get16(payload + AT_NUMBER);
    const uint8_t reason = name_fault(memory, payload);
    begin_reply(payload, reply);
    if (reason == TW_REASON_NONE) {
        const uint8_t place = find(memory, number);
        if (place < TW_REPLIES) {
            return again(&memory->replies[place], reply);
        }
        if (number != 0u && !has_passed(memory, number)) {
            take(memory, number); /* so that "unknown" is final */
        }
    }
    return tw_end_answer(reply, TW_STATE_UNKNOWN, reason, 0);
}

void tw_memory_remember(tw_memory *memory, const uint8_t *reply)
{
    const uint16_t number = tw_get16(reply + AT_NUMBER);
    if (!has_passed(memory, number) || name_fault(memory, reply) != TW_REASON_NONE) {
        return;
    }
    uint8_t place = find(memory, number);
    if (place == TW_REPLIES) { /* a new one: the oldest goes */
        place = memory->next;
        memory->next = (uint8_t)((memory->next + 1u) % TW_REPLIES);
    }
    tw_reply *kept = &memory->replies[place];
    kept->number = number;
    kept->code = reply[TW_AT_CODE];
    memcpy(kept->rest, reply + AT_REST,
           (size_t)((kept->code == TW_CODE_FACTS ? TW_LEN_FACTS : TW_LEN_ANSWER) - AT_REST));
}

uint16_t tw_memory_accepted(const tw_memory *memory)
{
    for (uint8_t at = 0; at < TW_REPLIES; at++) {
        const tw_reply *reply = &memory->replies[(memory->next + at) % TW_REPLIES];
        if (reply->code == TW_CODE_ANSWER && reply->rest[0] == TW_STATE_ACCEPTED) {
            return reply->number;
        }
    }
    return 0;
}
