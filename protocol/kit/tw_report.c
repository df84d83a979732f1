/* What a module says: each message written from its state, in a fixed order. */
#include <string.h>

#include "tw_inner.h"

/* Most reports name the sender's boot first, and some the box behind it. */
static void sign(const tw_module *module, uint8_t *p, uint8_t code)
{
    p[TW_AT_CODE] = code;
    tw_put32(p + TW_AT_LOCK_STATE_BOOT, module->memory.boot);
    tw_put16(p + TW_AT_LOCK_STATE_IDENTITY_BITS, module->memory.identity_bits);
}

static uint8_t write_presence(const tw_module *module, uint8_t *p)
{
    const uint32_t left_ms = tw_owner_left_ms(&module->allegiance, module->ms);
    p[TW_AT_CODE] = TW_CODE_PRESENCE;
    memcpy(p + TW_AT_PRESENCE_IDENTITY, module->plate->identity, 8);
    tw_put32(p + TW_AT_PRESENCE_BOOT, module->memory.boot);
    tw_put32(p + TW_AT_PRESENCE_EPOCH, module->allegiance.epoch);
    tw_put32(p + TW_AT_PRESENCE_CONSOLE, module->allegiance.console);
    memcpy(p + TW_AT_PRESENCE_STOP_NUMBER, module->store.record + TW_KEPT_STOP_NUMBER, 4);
    tw_put32(p + TW_AT_PRESENCE_TIME_MS, module->ms);
    tw_put16(p + TW_AT_PRESENCE_OWNER_LEFT_MS, (uint16_t)left_ms); /* at most 60,000 */
    p[TW_AT_PRESENCE_FLAGS] = tw_flags(module);
    p[TW_AT_PRESENCE_FACE_UP] = (uint8_t)tw_measure(module, TW_FACE_UP);
    return TW_LEN_PRESENCE;
}

static uint8_t write_nameplate(const tw_module *module, uint8_t *p)
{
    const tw_plate *plate = module->plate;
    p[TW_AT_CODE] = TW_CODE_NAMEPLATE;
    memcpy(p + TW_AT_NAMEPLATE_IDENTITY, plate->identity, 8);
    tw_put16(p + TW_AT_NAMEPLATE_WHEEL_MAX_RPM,
             (uint16_t)tw_setting(module, TW_SETTING_WHEEL_LIMIT_RPM));
    tw_put16(p + TW_AT_NAMEPLATE_FIRMWARE, plate->firmware);
    memcpy(p + TW_AT_NAMEPLATE_NAME, plate->name, TW_TEXT_BYTES);
    memcpy(p + TW_AT_NAMEPLATE_KIND, plate->kind, TW_TEXT_BYTES);
    return TW_LEN_NAMEPLATE;
}

static uint8_t write_telemetry(tw_module *module, uint8_t *p)
{
    const uint8_t staged = module->staged && module->activity == TW_ACTIVITY_STILL;
    sign(module, p, TW_CODE_TELEMETRY);
    tw_put16(p + TW_AT_TELEMETRY_SEQUENCE, ++module->sequence);
    tw_put32(p + TW_AT_TELEMETRY_TIME_MS, module->ms);
    p[TW_AT_TELEMETRY_ACTIVITY] = staged ? TW_ACTIVITY_STAGED : module->activity;
    p[TW_AT_TELEMETRY_FLAGS] = tw_flags(module);
    p[TW_AT_TELEMETRY_FACE_UP] = (uint8_t)tw_measure(module, TW_FACE_UP);
    tw_put16(p + TW_AT_TELEMETRY_WHEEL_RPM, (uint16_t)tw_measure(module, TW_WHEEL_RPM));
    tw_put16(p + TW_AT_TELEMETRY_BATTERY_MV, (uint16_t)tw_measure(module, TW_BATTERY_MV));
    tw_put16(p + TW_AT_TELEMETRY_TEMPERATURE_CC, (uint16_t)tw_measure(module, TW_TEMPERATURE_CC));
    tw_put16(p + TW_AT_TELEMETRY_TILT_DDEG, (uint16_t)tw_measure(module, TW_TILT_DDEG));
    tw_put16(p + TW_AT_TELEMETRY_IDENTITY_BITS, module->memory.identity_bits);
    return TW_LEN_TELEMETRY;
}

static uint8_t write_stopped(const tw_module *module, uint8_t *p)
{
    p[TW_AT_CODE] = TW_CODE_STOPPED;
    memcpy(p + TW_AT_STOPPED_STOP_NUMBER, module->store.record + TW_KEPT_STOP_NUMBER, 5);
    p[TW_AT_STOPPED_ACTIVITY] = module->activity;
    tw_put16(p + TW_AT_STOPPED_WHEEL_RPM, (uint16_t)tw_measure(module, TW_WHEEL_RPM));
    tw_put32(p + TW_AT_STOPPED_BOOT, module->memory.boot);
    tw_put16(p + TW_AT_STOPPED_IDENTITY_BITS, module->memory.identity_bits);
    return TW_LEN_STOPPED;
}

static uint8_t write_echo(const tw_module *module, uint8_t *p, const uint8_t *probe)
{
    const uint32_t held_us = module->plate->hooks->clock_us(module->context) - module->clock_us;
    sign(module, p, TW_CODE_ECHO);
    memcpy(p + TW_AT_ECHO_SEQUENCE, probe + TW_AT_PROBE_SEQUENCE, 2);
    tw_put16(p + TW_AT_ECHO_IDENTITY_BITS, module->memory.identity_bits);
    tw_put32(p + TW_AT_ECHO_RECEIVED_US, (uint32_t)module->us);
    tw_put32(p + TW_AT_ECHO_RECEIVED_US + 4, (uint32_t)(module->us >> 32));
    tw_put32(p + TW_AT_ECHO_HELD_US, held_us);
    return TW_LEN_ECHO;
}

static uint8_t write_setting(const tw_module *module, uint8_t *p, uint8_t setting)
{
    int32_t row[3];
    tw_setting_row(module, setting, row);
    sign(module, p, TW_CODE_SETTING_VALUE);
    p[TW_AT_SETTING_VALUE_SETTING] = setting;
    p[TW_AT_SETTING_VALUE_SETTINGS] = TW_SETTING_CALIBRATION;
    tw_put32(p + TW_AT_SETTING_VALUE_VALUE, (uint32_t)row[0]);
    tw_put32(p + TW_AT_SETTING_VALUE_LOWEST, (uint32_t)row[1]);
    tw_put32(p + TW_AT_SETTING_VALUE_HIGHEST, (uint32_t)row[2]);
    return TW_LEN_SETTING_VALUE;
}

static uint8_t write_lock(const tw_module *module, uint8_t *p)
{
    sign(module, p, TW_CODE_LOCK_STATE);
    p[TW_AT_LOCK_STATE_LOCKED] = tw_is_locked(module);
    memcpy(p + TW_AT_LOCK_STATE_PERSON, module->store.record + TW_KEPT_PERSON, TW_TEXT_BYTES);
    return TW_LEN_LOCK_STATE;
}

/* The next fault that is to be told of; 0 where there is none any more. */
static uint8_t write_fault(tw_module *module, uint8_t *p)
{
    uint8_t place = 0;
    if (module->tell == 0u) {
        return 0;
    }
    while (!((uint32_t)module->tell >> place & 1u)) {
        place++;
    }
    module->tell = (uint8_t)(module->tell & (module->tell - 1u));
    sign(module, p, TW_CODE_FAULT_NOTICE);
    p[TW_AT_FAULT_NOTICE_FAULT] = (uint8_t)(place + 1u);
    p[TW_AT_FAULT_NOTICE_STANDING] = (uint8_t)((uint32_t)module->faults >> place & 1u);
    tw_put32(p + TW_AT_FAULT_NOTICE_TIME_MS, module->faults_ms[place]);
    tw_put16(p + TW_AT_FAULT_NOTICE_DETAIL, (uint16_t)module->details[place]);
    return TW_LEN_FAULT_NOTICE;
}

/* The next chunk that is asked for, whose bit in the question is then taken out; 0 where there is
 * none any more. Of a trace that there is not, one chunk says so. */
static uint8_t write_chunk(const tw_module *module, uint8_t *p, uint8_t *ask)
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
    sign(module, p, TW_CODE_TRACE_CHUNK);
    tw_put16(p + TW_AT_TRACE_CHUNK_NUMBER, number);
    tw_put16(p + TW_AT_TRACE_CHUNK_IDENTITY_BITS, module->memory.identity_bits);
    tw_put16(p + TW_AT_TRACE_CHUNK_CHUNK, (uint16_t)(chunks ? chunk : 0u));
    tw_put16(p + TW_AT_TRACE_CHUNK_CHUNKS, chunks);
    if (chunks) {
        tw_trace_chunk(&module->trace, (uint16_t)chunk, p + TW_AT_TRACE_CHUNK_DATA);
        tw_put32(ask + TW_AT_TRACE_ASK_WANTED, wanted >> 1);
        tw_put16(ask + TW_AT_TRACE_ASK_FIRST, (uint16_t)(chunk + 1u));
    } else {
        memset(p + TW_AT_TRACE_CHUNK_DATA, 0, TW_CHUNK_BYTES);
        ask[TW_AT_CODE] = 0; /* said once */
    }
    return TW_LEN_TRACE_CHUNK;
}

static void write_facts(const tw_module *module, uint8_t *p)
{
    const tw_work *work = &module->work;
    p[TW_AT_CODE] = TW_CODE_FACTS;
    p[TW_AT_FACTS_REASON] = work->cut;
    p[TW_AT_FACTS_FACE_BEFORE] = work->face_before;
    p[TW_AT_FACTS_FACE_AFTER] = (uint8_t)tw_measure(module, TW_FACE_UP);
    p[TW_AT_FACTS_SETTLED] = (uint8_t)tw_measure(module, TW_SETTLED);
    tw_put16(p + TW_AT_FACTS_TURNED_DDEG, (uint16_t)tw_turned_ddeg(module));
    tw_put16(p + TW_AT_FACTS_PEAK_TILT_DDEG, (uint16_t)work->peak_tilt_ddeg);
    tw_put16(p + TW_AT_FACTS_PEAK_RATE_DPS, work->peak_rate_dps);
    tw_put16(p + TW_AT_FACTS_WHEEL_AT_BRAKE_RPM, work->at_brake_rpm);
    tw_put32(p + TW_AT_FACTS_BRAKE_US, work->brake_us);
    tw_put16(p + TW_AT_FACTS_SPIN_UP_MS, work->spin_up_ms);
    tw_put16(p + TW_AT_FACTS_SETTLE_MS, work->settle_ms);
    tw_put16(p + TW_AT_FACTS_SAG_MV, work->sag_mV);
    tw_put32(p + TW_AT_FACTS_STARTED_MS, work->started_ms);
}

/* The next command whose end is owed: first what was done with the wheel, then Rests that were
 * accepted meanwhile, which the command memory knows. 0 where there is none any more. */
static uint8_t write_end(tw_module *module, uint8_t *p)
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
        (void)tw_answer(module, epoch, number, 0, 0, 0); /* its name; the rest is written over */
        write_facts(module, p);
        tw_memory_remember(&module->memory, p);
        return TW_LEN_FACTS;
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

static uint8_t write_next(tw_module *module, uint16_t bit, uint8_t *p, uint8_t *payload)
{
    switch (bit) {
    case TW_SAY_REPLY:
        return p[TW_AT_CODE] == TW_CODE_FACTS ? TW_LEN_FACTS : TW_LEN_ANSWER;
    case TW_SAY_STOPPED:
        return write_stopped(module, p);
    case TW_SAY_PRESENCE:
        return write_presence(module, p);
    case TW_SAY_NAMEPLATE:
        return write_nameplate(module, p);
    case TW_SAY_ECHO:
        return write_echo(module, p, payload);
    case TW_SAY_SETTING:
        return write_setting(module, p, payload[TW_AT_SETTING_ASK_SETTING]);
    case TW_SAY_LOCK:
        return write_lock(module, p);
    case TW_SAY_FAULTS:
        return write_fault(module, p);
    case TW_SAY_STAGE_CUT:
        return tw_answer(module, tw_get32(module->stage + TW_AT_PIVOT_EPOCH),
                         tw_get16(module->stage + TW_AT_PIVOT_NUMBER), TW_STATE_CUT,
                         module->stage_cut, 0);
    case TW_SAY_ENDS:
        return write_end(module, p);
    case TW_SAY_TRACE:
        return write_chunk(module, p, payload);
    default:
        return write_telemetry(module, p);
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
            const uint8_t length = write_next(module, bit, module->frame + 1, payload);
            if (length == 0u || !(bit & several)) {
                module->says = (uint16_t)(module->says & ~bit);
            }
            if (length > 0u) {
                send(module, length);
            }
        }
    }
}
