/* Numbered commands: a module's own interlocks, what is done at once, and what is staged. */
#include <string.h>

#include "tw_inner.h"

#define STAGED_MOTION_MS 4000u /* what a staged motion should take, once it has started */

/* All commands have their envelope, and all drives their latest start, at the same place. */
enum {
    AT_EPOCH = TW_AT_REST_EPOCH,
    AT_NUMBER = TW_AT_REST_NUMBER,
    AT_LATEST_MS = TW_AT_SPIN_LATEST_MS,
    AT_STAGE = TW_AT_PIVOT_STAGE,
    AT_PERSON = TW_AT_LOCK_OUT_PERSON
};

static uint8_t is_motion(uint8_t code)
{
    return code == TW_CODE_PIVOT || code == TW_CODE_HOP || code == TW_CODE_TWIST;
}

static int8_t direction_of(const uint8_t *payload)
{
    const uint8_t pivot = payload[TW_AT_CODE] == TW_CODE_PIVOT;
    return (int8_t)payload[pivot ? TW_AT_PIVOT_DIRECTION : TW_AT_HOP_DIRECTION];
}

int32_t tw_goal_rpm(const uint8_t *payload)
{
    const uint8_t code = payload[TW_AT_CODE];
    if (code == TW_CODE_SPIN) {
        return (int16_t)tw_get16(payload + TW_AT_SPIN_SPEED_RPM);
    }
    const int32_t speed_rpm = tw_get16(
        payload + (code == TW_CODE_PIVOT ? TW_AT_PIVOT_SPEED_RPM : TW_AT_HOP_SPEED_RPM));
    return direction_of(payload) < 0 ? -speed_rpm : speed_rpm;
}

/* Fields without a meaning, and motions that this module cannot do. */
static uint8_t motion_fault(const tw_module *module, const uint8_t *payload)
{
    const uint8_t code = payload[TW_AT_CODE];
    const int8_t direction = direction_of(payload);
    uint8_t kind = payload[TW_AT_PIVOT_SETTING];
    if ((direction != 1 && direction != -1) || tw_goal_rpm(payload) == 0) {
        return TW_REASON_BAD_FIELD;
    }
    if (code != TW_CODE_PIVOT) { /* the bits of TW_CAN_HOP and TW_CAN_TWIST */
        kind = (uint8_t)(code - TW_CODE_HOP + 5);
    } else if (kind < TW_STANDS_ON_FLOOR || kind > TW_STANDS_ON_FLAT) {
        return TW_REASON_BAD_FIELD;
    }
    return module->plate->can >> kind & 1u ? TW_REASON_NONE : TW_REASON_UNSUPPORTED;
}

static uint8_t is_busy(const tw_module *module)
{
    return module->staged || module->activity != TW_ACTIVITY_STILL;
}

/* How the body lies, for what is to be done. */
static uint8_t posture_fault(const tw_module *module, const uint8_t *payload)
{
    const uint8_t code = payload[TW_AT_CODE];
    const uint8_t upright =
        code == TW_CODE_TWIST ||
        (code == TW_CODE_PIVOT && payload[TW_AT_PIVOT_SETTING] == TW_STANDS_ON_FLAT);
    const int32_t face_up = tw_measure(module, TW_FACE_UP);
    const uint8_t level = face_up >= 1 && face_up <= 4;
    if (upright ? level : code != TW_CODE_SPIN && face_up > 4) {
        return TW_REASON_AXIS_UPRIGHT;
    }
    return tw_measure(module, TW_SETTLED) ? TW_REASON_NONE : TW_REASON_NOT_SETTLED;
}

/* What a flag forbids, in the order in which it is looked at. */
static uint8_t standing_fault(uint8_t flags)
{
    if (flags & TW_FLAG_LATCHED) {
        return TW_REASON_STOP_IN_FORCE;
    }
    if (flags & TW_FLAG_LOCKED_OUT) {
        return TW_REASON_LOCKED_OUT;
    }
    if (flags & TW_FLAG_FAULTY) {
        return TW_REASON_FAULT;
    }
    return flags & TW_FLAG_CLOCK_TOLD ? TW_REASON_NONE : TW_REASON_CLOCK_UNKNOWN;
}

/* The interlocks of what turns the wheel: WIRE.md, "The module's own interlocks", line by line. */
static uint8_t drive_fault(const tw_module *module, const uint8_t *payload)
{
    const uint8_t code = payload[TW_AT_CODE];
    const int32_t goal_rpm = tw_goal_rpm(payload);
    int32_t limit_rpm = tw_setting(module, TW_SETTING_WHEEL_LIMIT_RPM);
    const uint8_t flags = tw_flags(module);
    uint8_t reason = TW_REASON_NONE;
    if (is_motion(code)) {
        reason = motion_fault(module, payload);
    } else if (goal_rpm == 0 || tw_get16(payload + TW_AT_SPIN_HOLD_MS) == 0u) {
        reason = TW_REASON_BAD_FIELD;
    }
    if (reason == TW_REASON_NONE) {
        reason = standing_fault(flags);
    }
    if (reason != TW_REASON_NONE) {
        return reason;
    }
    if (tw_get32(payload + AT_LATEST_MS) - module->ms >= 0x80000000u) {
        return TW_REASON_TOO_LATE;
    }
    if (!(flags & TW_FLAG_PERMITTED)) {
        return TW_REASON_NO_PERMIT;
    }
    if (is_busy(module)) {
        return TW_REASON_BUSY;
    }
    if (limit_rpm > module->plate->wheel_max_rpm) { /* stored on another board, perhaps */
        limit_rpm = module->plate->wheel_max_rpm;
    }
    if (goal_rpm > limit_rpm || goal_rpm < -limit_rpm) {
        return TW_REASON_OVER_SPEED_LIMIT;
    }
    return flags & TW_FLAG_BATTERY_LOW ? TW_REASON_BATTERY_LOW : posture_fault(module, payload);
}

/* A lock, and who may put it on or take it off. */
static uint8_t lock_fault(const tw_module *module, const uint8_t *payload)
{
    static const uint8_t nobody[TW_TEXT_BYTES] = {0};
    const uint8_t *person = payload + AT_PERSON;
    if (memcmp(person, nobody, TW_TEXT_BYTES) == 0) {
        return TW_REASON_BAD_FIELD;
    }
    if (!tw_is_locked(module) ||
        memcmp(person, module->store.record + TW_KEPT_PERSON, TW_TEXT_BYTES) == 0) {
        return TW_REASON_NONE;
    }
    return payload[TW_AT_CODE] == TW_CODE_UNLOCK ? TW_REASON_OTHER_PERSON : TW_REASON_LOCKED_OUT;
}

static uint8_t setting_fault(const tw_module *module, const uint8_t *payload)
{
    int32_t row[3];
    const int32_t value = (int32_t)tw_get32(payload + TW_AT_SETTING_WRITE_VALUE);
    tw_setting_row(module, payload[TW_AT_SETTING_WRITE_SETTING], row);
    if (row[1] == row[2]) {
        return TW_REASON_READ_ONLY;
    }
    return value < row[1] || value > row[2] ? TW_REASON_BAD_FIELD : TW_REASON_NONE;
}

/* Why a fresh command is not carried out. */
static uint8_t refusal(const tw_module *module, const uint8_t *payload)
{
    switch (payload[TW_AT_CODE]) {
    case TW_CODE_REST:
        return TW_REASON_NONE;
    case TW_CODE_FLASH:
        if (tw_get16(payload + TW_AT_FLASH_DURATION_MS) == 0u) {
            return TW_REASON_BAD_FIELD;
        }
        return is_busy(module) ? TW_REASON_BUSY : TW_REASON_NONE;
    case TW_CODE_LOCK_OUT:
    case TW_CODE_UNLOCK:
        return lock_fault(module, payload);
    case TW_CODE_SETTING_WRITE:
        return setting_fault(module, payload);
    default:
        return drive_fault(module, payload);
    }
}

static uint32_t stage(tw_module *module, const uint8_t *payload)
{
    memcpy(module->stage, payload, payload[TW_AT_CODE] == TW_CODE_PIVOT ? TW_LEN_PIVOT : TW_LEN_HOP);
    module->staged = 1;
    module->says |= TW_SAY_TELEMETRY;
    return tw_until(tw_get32(payload + AT_LATEST_MS), module->ms) + STAGED_MOTION_MS;
}

/* Store a setting before it is said to be finished; take it back where it cannot be. */
static uint8_t write_setting(tw_module *module, const uint8_t *payload)
{
    const uint8_t setting = payload[TW_AT_SETTING_WRITE_SETTING];
    const uint8_t at = (uint8_t)(TW_KEPT_SETTINGS + 4u * (setting - 1u));
    uint8_t before[4];
    memcpy(before, module->store.record + at, 4);
    if (!tw_keep(module, at, payload + TW_AT_SETTING_WRITE_VALUE, 4)) {
        memcpy(module->store.record + at, before, 4);
        return TW_REASON_FAULT;
    }
    if (setting == TW_SETTING_WHEEL_LIMIT_RPM) {
        module->says |= TW_SAY_NAMEPLATE;
    }
    return TW_REASON_NONE;
}

/* Put a lock on, or take it off: 12 bytes of a name, or of zeros. */
static void lock(tw_module *module, const uint8_t *payload)
{
    uint8_t person[TW_TEXT_BYTES] = {0};
    if (payload[TW_AT_CODE] == TW_CODE_LOCK_OUT) {
        memcpy(person, payload + AT_PERSON, TW_TEXT_BYTES);
        tw_rest_wheel(module, TW_REASON_LOCKED_OUT);
        tw_unstage(module, TW_REASON_LOCKED_OUT);
    }
    (void)tw_keep(module, TW_KEPT_PERSON, person, TW_TEXT_BYTES);
    module->says |= TW_SAY_LOCK;
}

/* Carry a fresh command out, or begin to. Returns its state; *reason and *expect_ms belong to it. */
static uint8_t carry_out(tw_module *module, const uint8_t *payload, uint8_t *reason,
                         uint32_t *expect_ms)
{
    const uint8_t code = payload[TW_AT_CODE];
    if (is_motion(code) && payload[AT_STAGE] != 0u) {
        *expect_ms = stage(module, payload);
        return TW_STATE_ACCEPTED;
    }
    if (is_motion(code) || code == TW_CODE_SPIN || code == TW_CODE_FLASH) {
        *expect_ms = tw_begin(module, payload);
        return TW_STATE_ACCEPTED;
    }
    uint8_t state = TW_STATE_FINISHED;
    if (code == TW_CODE_REST) {
        tw_rest_wheel(module, TW_REASON_RESTED);
        tw_unstage(module, TW_REASON_RESTED);
        if (module->activity != TW_ACTIVITY_STILL && module->activity != TW_ACTIVITY_FLASHING) {
            *expect_ms = tw_rest_left_ms(module);
            state = TW_STATE_ACCEPTED;
        }
    } else if (code == TW_CODE_SETTING_WRITE) {
        *reason = write_setting(module, payload);
        if (*reason != TW_REASON_NONE) {
            return TW_STATE_REFUSED;
        }
    } else {
        lock(module, payload);
    }
    tw_carried_out(module, code, tw_get16(payload + AT_NUMBER));
    return state;
}

void tw_order(tw_module *module, const uint8_t *payload)
{
    const uint8_t owned = tw_owner_left_ms(&module->allegiance, module->ms) > 0u;
    module->says |= TW_SAY_REPLY;
    if (tw_memory_judge(&module->memory, payload, owned, module->frame + 1)) {
        return;
    }
    uint8_t reason = refusal(module, payload);
    uint32_t expect_ms = 0;
    uint8_t state = TW_STATE_REFUSED;
    if (reason == TW_REASON_NONE) {
        state = carry_out(module, payload, &reason, &expect_ms);
    }
    (void)tw_answer(module, tw_get32(payload + AT_EPOCH), tw_get16(payload + AT_NUMBER), state,
                    reason, (uint16_t)(expect_ms < UINT16_MAX ? expect_ms : UINT16_MAX));
}

void tw_go(tw_module *module, const uint8_t *payload)
{
    const tw_allegiance *allegiance = &module->allegiance;
    if (!module->staged || !allegiance->told || payload[TW_AT_GO_STAGE] != module->stage[AT_STAGE] ||
        tw_get32(payload + TW_AT_GO_CONSOLE) != allegiance->console) {
        return;
    }
    const uint32_t start_ms = tw_get32(payload + TW_AT_GO_START_MS) + allegiance->offset_ms;
    if (tw_until(start_ms, module->ms) > 0u &&
        tw_get32(module->stage + AT_LATEST_MS) - start_ms < 0x80000000u) {
        module->start_ms = start_ms;
        module->staged = 2;
    }
}

void tw_unstage(tw_module *module, uint8_t reason)
{
    if (module->staged) {
        module->staged = 0;
        module->stage_cut = reason;
        module->says |= TW_SAY_STAGE_CUT | TW_SAY_TELEMETRY;
    }
}

void tw_stage_look(tw_module *module)
{
    const uint8_t waits = module->staged;
    if (waits == 2u && tw_until(module->start_ms, module->ms) == 0u) {
        module->staged = 0; /* else it would keep itself busy */
        const uint8_t reason = refusal(module, module->stage);
        if (reason == TW_REASON_NONE) {
            (void)tw_begin(module, module->stage);
        } else {
            module->staged = waits;
            tw_unstage(module, reason);
        }
    } else if (waits == 1u &&
               tw_get32(module->stage + AT_LATEST_MS) - module->ms >= 0x80000000u) {
        tw_unstage(module, TW_REASON_TOO_LATE);
    }
}
