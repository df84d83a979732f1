/* A module's start, its clock, and what it does about each message that is no command. */
#include "tw_module.h"

#include <string.h>

#include "tw_inner.h"

/* Look at the clock: module time goes on by what it went on. */
static void look_at_clock(tw_module *module)
{
    const uint32_t clock_us = module->plate->hooks->clock_us(module->context);
    uint32_t passed_us = clock_us - module->clock_us;
    module->clock_us = clock_us;
    module->us += passed_us;
    passed_us += module->part_us;
    module->ms += passed_us / 1000u;
    module->part_us = (uint16_t)(passed_us % 1000u);
}

/* A record for a board that has none yet: settings as delivered. */
static void fill_record(tw_module *module)
{
    const tw_plate *plate = module->plate;
    uint8_t *settings = module->store.record + TW_KEPT_SETTINGS;
    tw_put16(settings, plate->wheel_max_rpm);
    tw_put16(settings + 4, plate->telemetry_ms);
    tw_put16(settings + 8, plate->battery_low_mV);
}

/* The next boot number, stored before anything is said. */
static void start_boot(tw_module *module, uint32_t drawn_boot)
{
    uint32_t boot = drawn_boot ? drawn_boot : 1u;
    if (tw_store_open(&module->store, &module->plate->hooks->storage, module->context)) {
        boot = tw_get32(module->store.record + TW_KEPT_BOOT) + 1u;
    } else {
        fill_record(module);
    }
    if (!tw_store_put32(&module->store, TW_KEPT_BOOT, boot)) {
        /* It may have been used before. A drawn one has hardly been; but no counter under a key
         * may ever come twice, so then nothing is sealed. */
        boot = drawn_boot ? drawn_boot : boot;
        module->mute = 1;
        tw_module_fault(module, TW_FAULT_STORAGE_BAD, 1, 0);
    }
    module->memory.boot = boot;
    module->gate.boot = boot;
    module->counter.opening = boot;
}

void tw_module_start(tw_module *module, const tw_plate *plate, void *context, uint32_t drawn_boot,
                     tw_sample *samples, uint16_t room)
{
    memset(module, 0, sizeof *module);
    module->plate = plate;
    module->context = context;
    module->trace.samples = samples;
    module->trace.room = room;
    module->clock_us = plate->hooks->clock_us(context);
    module->memory.identity_bits = tw_get16(plate->identity);
    module->idle_mV = (uint16_t)tw_measure(module, TW_BATTERY_MV);
    start_boot(module, drawn_boot);
    plate->hooks->light(context, 0);
    const uint8_t turns = tw_measure(module, TW_WHEEL_RPM) != 0;
    plate->hooks->wheel(context, turns ? TW_WHEEL_REST : TW_WHEEL_OFF, 0);
    module->activity = turns ? TW_ACTIVITY_RESTING : TW_ACTIVITY_STILL;
}

/* Whether a frame to destination is meant for this module, and may be sent so. */
static uint8_t concerns(const tw_module *module, uint16_t destination, uint8_t code)
{
    if (destination == module->plate->address) {
        return 1;
    }
    const uint16_t group = (uint16_t)(destination - TW_ADDRESS_FIRST_GROUP);
    if (destination != TW_ADDRESS_EVERYONE &&
        (group >= TW_GROUPS ||
         !((uint32_t)tw_setting(module, TW_SETTING_GROUPS) >> group & 1u))) {
        return 0;
    }
    return code == TW_CODE_ROLL_CALL || (code >= TW_CODE_PERMIT && code <= TW_CODE_GO) ||
           code == TW_CODE_STOP || code == TW_CODE_CLEAR;
}

static void roll_call(tw_module *module, const uint8_t *payload)
{
    if (tw_hear_roll_call(&module->allegiance, payload, module->ms)) {
        (void)tw_memory_adopt(&module->memory, module->allegiance.epoch);
        tw_gate_follow(&module->gate, module->allegiance.epoch);
        tw_trace_clear(&module->trace);
        module->staged = 0;
    }
    module->says |= TW_SAY_PRESENCE | TW_SAY_NAMEPLATE | TW_SAY_FAULTS;
    if (tw_is_locked(module)) {
        module->says |= TW_SAY_LOCK;
    }
    module->tell = module->faults;
}

/* Whether this is a Probe, TraceAsk or Slot of another boot or box: all have both at one place. */
static uint8_t is_anothers(const tw_module *module, const uint8_t *payload)
{
    const uint8_t code = payload[TW_AT_CODE];
    return (code == TW_CODE_PROBE || code == TW_CODE_TRACE_ASK || code == TW_CODE_SLOT) &&
           (tw_get32(payload + TW_AT_PROBE_BOOT) != module->memory.boot ||
            tw_get16(payload + TW_AT_PROBE_IDENTITY_BITS) != module->memory.identity_bits);
}

/* Latch and rest. An older number than the newest known is obeyed, and not kept. */
static void stop(tw_module *module, const uint8_t *payload)
{
    uint8_t kept[5];
    const uint8_t *known = module->store.record + TW_KEPT_STOP_NUMBER;
    const uint8_t *heard = payload + TW_AT_STOP_STOP_NUMBER;
    memcpy(kept, tw_get32(heard) > tw_get32(known) ? heard : known, 4);
    kept[4] = 1;
    tw_rest_wheel(module, TW_REASON_STOPPED);
    tw_unstage(module, TW_REASON_STOPPED);
    (void)tw_keep(module, TW_KEPT_STOP_NUMBER, kept, sizeof kept);
}

/* Lift the latch, but only for the newest stop that is known. */
static void clear(tw_module *module, const uint8_t *payload)
{
    const uint8_t none = 0;
    if (tw_get32(payload + TW_AT_CLEAR_STOP_NUMBER) ==
        tw_get32(module->store.record + TW_KEPT_STOP_NUMBER)) {
        (void)tw_keep(module, TW_KEPT_LATCHED, &none, 1);
    }
}

static void dispatch(tw_module *module, const uint8_t *payload)
{
    if (is_anothers(module, payload)) {
        return;
    }
    switch (payload[TW_AT_CODE]) {
    case TW_CODE_ROLL_CALL:
        roll_call(module, payload);
        break;
    case TW_CODE_QUERY:
        (void)tw_memory_query(&module->memory, payload, module->frame + 1);
        module->says |= TW_SAY_REPLY;
        break;
    case TW_CODE_PROBE:
        tw_hear_probe(&module->allegiance, payload, module->ms);
        module->says |= TW_SAY_ECHO;
        break;
    case TW_CODE_PERMIT:
        tw_hear_permit(&module->allegiance, payload);
        break;
    case TW_CODE_RELEASE:
        tw_hear_release(&module->allegiance, payload);
        break;
    case TW_CODE_GO:
        tw_go(module, payload);
        break;
    case TW_CODE_SETTING_ASK:
        module->says |= TW_SAY_SETTING;
        break;
    case TW_CODE_TRACE_ASK:
        module->says |= TW_SAY_TRACE;
        break;
    case TW_CODE_SLOT:
        tw_hear_slot(&module->allegiance, payload);
        break;
    case TW_CODE_STOP:
        stop(module, payload);
        module->says |= TW_SAY_STOPPED;
        break;
    case TW_CODE_CLEAR:
        clear(module, payload);
        module->says |= TW_SAY_STOPPED;
        break;
    default:
        tw_order(module, payload);
        break;
    }
}

/* Do all that is due; what there is to say of it is said later. */
static void do_due(tw_module *module)
{
    look_at_clock(module);
    tw_allegiance_age(&module->allegiance, module->ms);
    tw_look_at_permit(module);
    tw_step(module);
    tw_stage_look(module);
    const uint32_t due_ms =
        tw_report_due_ms(&module->allegiance, module->report_ms,
                         (uint32_t)tw_setting(module, TW_SETTING_TELEMETRY_PERIOD_MS));
    const uint32_t wait_ms = due_ms - module->report_ms;
    const uint32_t passed_ms = module->ms - module->report_ms;
    if (passed_ms >= wait_ms) {
        module->report_ms += passed_ms < 2u * wait_ms ? wait_ms : passed_ms;
        module->says |= TW_SAY_TELEMETRY;
    }
}

void tw_module_wake(tw_module *module)
{
    do_due(module);
    tw_flush(module, NULL);
}

void tw_module_payload(tw_module *module, uint8_t *payload, uint8_t length)
{
    const tw_keys *keys = module->plate->keys;
    do_due(module); /* what was due before comes first */
    tw_flush(module, NULL);
    if (keys != NULL ? tw_gate_admit(&module->gate, keys, payload, &length) != TW_OBEYED
                     : !tw_is_request(payload, length)) {
        return;
    }
    const uint8_t code = payload[TW_AT_CODE];
    if (concerns(module, tw_get16(payload + TW_AT_DESTINATION), code)) {
        dispatch(module, payload);
        tw_look_at_permit(module);
        tw_flush(module, payload);
    }
}

void tw_module_hear(tw_module *module, uint8_t byte)
{
    uint8_t length = 0;
    if (tw_read_byte(&module->reader, byte, &length) == TW_PAYLOAD) {
        tw_module_payload(module, module->reader.held, length);
    }
}

void tw_module_fault(tw_module *module, uint8_t fault, uint8_t standing, int16_t detail)
{
    if (fault == 0u || fault > TW_FAULT_BRAKE_WEAK) {
        return;
    }
    const uint8_t bit = (uint8_t)(1u << (fault - 1u));
    module->tell |= bit;
    module->says |= TW_SAY_FAULTS;
    module->faults_ms[fault - 1u] = module->ms;
    module->details[fault - 1u] = detail;
    module->faults = (uint8_t)(standing ? module->faults | bit : module->faults & ~bit);
    if (standing) {
        tw_rest_wheel(module, TW_REASON_FAULT);
    }
}
