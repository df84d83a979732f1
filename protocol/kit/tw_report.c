/* What a module says, and in which order. */
#include <string.h>

#include "tw_inner.h"

static uint8_t write_setting(tw_module *module, uint8_t setting)
{
    int32_t given[5] = {setting, TW_SETTING_CALIBRATION, 0, 0, 0};
    tw_setting_row(module, setting, given + 2);
    return tw_write(module, TW_SETTING_VALUE, given);
}

/* The next fault that is to be told of; 0 where there is none any more. */
static uint8_t write_fault(tw_module *module)
{
    uint8_t place = 0;
    if (module->tell == 0u) {
        return 0;
    }
    while (!((uint32_t)module->tell >> place & 1u)) {
        place++;
    }
    module->tell = (uint8_t)(module->tell & (module->tell - 1u));
    const int32_t given[4] = {place + 1, (int32_t)((uint32_t)module->faults >> place & 1u),
                              (int32_t)module->faults_ms[place], module->details[place]};
    return tw_write(module, TW_FAULT_NOTICE, given);
}

/* The next chunk that is asked for, whose bit in the question is then taken out; 0 where there is
 * none any more. Of a trace that there is not, one chunk says so. */
static uint8_t write_chunk(tw_module *module, uint8_t *ask)
{
    const uint16_t number = tw_get16(ask + TW_AT_TRACE_ASK_NUMBER);
    const uint16_t chunks =
        tw_trace_chunks(&module->trace, tw_get32(ask + TW_AT_TRACE_ASK_EPOCH), number);
    uint32_t wanted = tw_get32(ask + TW_AT_TRACE_ASK_WANTED);
    uint32_t chunk = tw_get16(ask + TW_AT_TRACE_ASK_FIRST);
    while (chunks && wanted && !(wanted & 1u)) {
        wanted >>= 1;
        chunk++;
    }
    if (chunks ? wanted == 0u || chunk >= chunks : ask[TW_AT_CODE] == 0u) {
        return 0;
    }
    const int32_t given[3] = {number, chunks ? (int32_t)chunk : 0, chunks};
    uint8_t *data = module->frame + 1 + tw_write(module, TW_TRACE_CHUNK, given);
    if (chunks) {
        tw_trace_chunk(&module->trace, (uint16_t)chunk, data);
        tw_put32(ask + TW_AT_TRACE_ASK_WANTED, wanted >> 1);
        tw_put16(ask + TW_AT_TRACE_ASK_FIRST, (uint16_t)(chunk + 1u));
    } else {
        memset(data, 0, TW_CHUNK_BYTES);
        ask[TW_AT_CODE] = 0; /* said once */
    }
    return TW_LEN_TRACE_CHUNK;
}

/* The next command whose end is owed: first what was done with the wheel, then Rests that were
 * accepted meanwhile, which the command memory knows. 0 where there is none any more. */
static uint8_t write_end(tw_module *module)
{
    tw_work *work = &module->work;
    const uint8_t code = work->code;
    const uint32_t epoch = code ? work->epoch : module->memory.epoch;
    const uint16_t number = code ? work->number : tw_memory_accepted(&module->memory);
    work->code = 0;
    if (number == 0u) {
        return 0;
    }
    if (code != 0u && code != TW_CODE_SPIN && code != TW_CODE_FLASH) {
        const uint8_t length = tw_write(module, TW_FACTS, NULL);
        tw_memory_remember(&module->memory, module->frame + 1);
        return length;
    }
    const uint8_t cut = code ? work->cut : 0u;
    return tw_answer(module, epoch, number, cut ? TW_STATE_CUT : TW_STATE_FINISHED, cut, 0);
}

uint8_t tw_answer(tw_module *module, uint32_t epoch, uint16_t number, uint8_t state,
                  uint8_t reason, uint16_t expect_ms)
{
    uint8_t *p = module->frame + 1;
    tw_put32(p + TW_AT_ANSWER_EPOCH, epoch);
    tw_put32(p + TW_AT_ANSWER_BOOT, module->memory.boot);
    tw_put16(p + TW_AT_ANSWER_NUMBER, number);
    const uint8_t length = tw_end_answer(p, state, reason, expect_ms);
    tw_memory_remember(&module->memory, p);
    return length;
}

static uint8_t write_next(tw_module *module, uint16_t bit, uint8_t *payload)
{
    switch (bit) {
    case TW_SAY_REPLY:
        return module->frame[1 + TW_AT_CODE] == TW_CODE_FACTS ? TW_LEN_FACTS : TW_LEN_ANSWER;
    case TW_SAY_STOPPED:
        return tw_write(module, TW_STOPPED, NULL);
    case TW_SAY_PRESENCE:
        return tw_write(module, TW_PRESENCE, NULL);
    case TW_SAY_NAMEPLATE:
        return tw_write(module, TW_NAMEPLATE, NULL);
    case TW_SAY_ECHO:
        return tw_write(module, TW_ECHO, NULL);
    case TW_SAY_SETTING:
        return write_setting(module, payload[TW_AT_SETTING_ASK_SETTING]);
    case TW_SAY_LOCK:
        return tw_write(module, TW_LOCK_STATE, NULL);
    case TW_SAY_FAULTS:
        return write_fault(module);
    case TW_SAY_STAGE_CUT:
        return tw_answer(module, tw_get32(module->stage + TW_AT_PIVOT_EPOCH),
                         tw_get16(module->stage + TW_AT_PIVOT_NUMBER), TW_STATE_CUT,
                         module->stage_cut, 0);
    case TW_SAY_ENDS:
        return write_end(module);
    case TW_SAY_TRACE:
        return write_chunk(module, payload);
    default:
        module->sequence++;
        return tw_write(module, TW_TELEMETRY, NULL);
    }
}

/* Address, seal, stuff and send what lies in the frame. */
static void send(tw_module *module, uint8_t length)
{
    uint8_t *p = module->frame + 1;
    p[TW_AT_VERSION] = TW_WIRE_VERSION;
    tw_put16(p + TW_AT_DESTINATION, TW_ADDRESS_CONSOLE);
    tw_put16(p + TW_AT_SOURCE, module->plate->address);
    if (module->plate->keys != NULL) {
        length = module->mute ? 0u : tw_seal(module->plate->keys, &module->counter, p, length);
    }
    length = tw_write_frame(module->frame, length);
    if (length > 0u) {
        module->plate->hooks->send(module->context, module->frame, length);
    }
}

void tw_flush(tw_module *module, uint8_t *payload)
{
    const uint16_t several = TW_SAY_FAULTS | TW_SAY_ENDS | TW_SAY_TRACE;
    for (uint16_t bit = 1; module->says != 0u; bit = (uint16_t)(bit << 1)) {
        while (module->says & bit) {
            const uint8_t length = write_next(module, bit, payload);
            if (length == 0u || !(bit & several)) {
                module->says = (uint16_t)(module->says & ~bit);
            }
            if (length > 0u) {
                send(module, length);
            }
        }
    }
}
