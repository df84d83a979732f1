#include "tw_message.h"

uint16_t tw_get16(const uint8_t *at)
{
    return (uint16_t)(at[0] | at[1] << 8);
}

uint32_t tw_get32(const uint8_t *at)
{
    return tw_get16(at) | (uint32_t)tw_get16(at + 2) << 16;
}

void tw_put16(uint8_t *at, uint16_t value)
{
    at[0] = (uint8_t)value;
    at[1] = (uint8_t)(value >> 8);
}

void tw_put32(uint8_t *at, uint32_t value)
{
    tw_put16(at, (uint16_t)value);
    tw_put16(at + 2, (uint16_t)(value >> 16));
}

/* Lengths by code, in three runs without gaps. */
static const uint8_t asks[] = {TW_LEN_ROLL_CALL, TW_LEN_QUERY, TW_LEN_PROBE,       TW_LEN_PERMIT,
                               TW_LEN_RELEASE,   TW_LEN_GO,    TW_LEN_SETTING_ASK, TW_LEN_TRACE_ASK,
                               0, /* BridgeAsk */ TW_LEN_SLOT};
static const uint8_t commands[] = {TW_LEN_PIVOT, TW_LEN_SPIN,  TW_LEN_REST,
                                   TW_LEN_FLASH, TW_LEN_HOP,   TW_LEN_TWIST,
                                   TW_LEN_LOCK_OUT, TW_LEN_UNLOCK, TW_LEN_SETTING_WRITE};

static uint8_t length_of(uint8_t code)
{
    const uint8_t ask = (uint8_t)(code - TW_CODE_ROLL_CALL);
    const uint8_t command = (uint8_t)(code - TW_CODE_PIVOT);
    if (ask < sizeof asks) {
        return asks[ask];
    }
    if (command < sizeof commands) {
        return commands[command];
    }
    return code == TW_CODE_STOP || code == TW_CODE_CLEAR ? TW_LEN_STOP : 0;
}

uint8_t tw_is_request(const uint8_t *payload, uint8_t length)
{
    return length >= TW_HEADER_BYTES && payload[TW_AT_VERSION] == TW_WIRE_VERSION &&
           length_of(payload[TW_AT_CODE]) == length;
}

uint32_t tw_until(uint32_t then_ms, uint32_t now_ms)
{
    const uint32_t ahead = then_ms - now_ms;
    return ahead < 0x80000000u ? ahead : 0u;
}
