/* What is done with the wheel, step by step: the activities and what is measured of a motion. */
#include <string.h>

#include "tw_inner.h"

#define STEADY_MS 60u   /* at the wanted speed before the brake, for the motor to settle */
#define QUIET_MS 150u   /* the body must have been quiet so long before a motion is over */
#define SETTLE_MS 1500u /* what it is expected to take from the brake to rest */
#define LONGEST_BRAKE_MS 3000u
#define LONGEST_SETTLE_MS 6000u /* a body that leans on something never is at rest on a face */

int32_t tw_measure(const tw_module *module, tw_quantity what)
{
    return module->plate->hooks->measure(module->context, what);
}

static void wheel(const tw_module *module, tw_wheel what, int16_t speed_rpm)
{
    module->plate->hooks->wheel(module->context, what, speed_rpm);
}

void tw_carried_out(const tw_module *module, uint8_t code, uint16_t number)
{
    if (module->plate->hooks->carried_out != NULL) {
        module->plate->hooks->carried_out(module->context, code, number);
    }
}

static uint32_t magnitude(int32_t value)
{
    return value < 0 ? 0u - (uint32_t)value : (uint32_t)value;
}

static void enter(tw_module *module, uint8_t activity)
{
    module->activity = activity;
    module->since_ms = module->ms;
    module->says |= TW_SAY_TELEMETRY;
}

static uint8_t is_driven(const tw_module *module)
{
    return module->activity == TW_ACTIVITY_SPINNING_UP || module->activity == TW_ACTIVITY_HOLDING;
}

static uint8_t brakes(const tw_work *work)
{
    return work->code != 0u && work->code != TW_CODE_SPIN && work->code != TW_CODE_FLASH;
}

int16_t tw_turned_ddeg(const tw_module *module)
{
    const tw_work *work = &module->work;
    const int32_t now_ddeg = tw_measure(module, TW_TURNED_DDEG);
    const int16_t turned = (int16_t)(uint16_t)((uint32_t)now_ddeg - (uint32_t)work->turned_from_ddeg);
    return work->goal_rpm < 0 ? (int16_t)-(int32_t)turned : turned;
}

uint32_t tw_begin(tw_module *module, const uint8_t *payload)
{
    tw_work *work = &module->work;
    const uint32_t limit_rpm = module->plate->wheel_max_rpm;
    memset(work, 0, sizeof *work);
    work->code = payload[TW_AT_CODE];
    work->epoch = tw_get32(payload + TW_AT_PIVOT_EPOCH);
    work->number = tw_get16(payload + TW_AT_PIVOT_NUMBER);
    work->started_ms = module->ms;
    if (work->code == TW_CODE_FLASH) {
        work->hold_ms = tw_get16(payload + TW_AT_FLASH_DURATION_MS);
        module->plate->hooks->light(module->context, 1);
        enter(module, TW_ACTIVITY_FLASHING);
        tw_carried_out(module, work->code, work->number);
        return work->hold_ms;
    }
    uint32_t then_ms = SETTLE_MS + QUIET_MS;
    work->goal_rpm = (int16_t)tw_goal_rpm(payload);
    const uint32_t speed_rpm = magnitude(work->goal_rpm);
    if (work->code == TW_CODE_SPIN) {
        work->hold_ms = tw_get16(payload + TW_AT_SPIN_HOLD_MS);
        then_ms = work->hold_ms + module->plate->rest_ms * speed_rpm / limit_rpm;
        tw_carried_out(module, work->code, work->number);
    } else {
        work->face_before = (uint8_t)tw_measure(module, TW_FACE_UP);
        work->turned_from_ddeg = (int16_t)(uint16_t)tw_measure(module, TW_TURNED_DDEG);
        tw_trace_begin(&module->trace, work->epoch, work->number, module->ms);
    }
    wheel(module, TW_WHEEL_DRIVE, work->goal_rpm);
    enter(module, TW_ACTIVITY_SPINNING_UP);
    return module->plate->spin_up_ms * speed_rpm / limit_rpm + STEADY_MS + then_ms;
}

static void start_rest(tw_module *module)
{
    wheel(module, TW_WHEEL_REST, 0);
    enter(module, TW_ACTIVITY_RESTING);
}

void tw_rest_wheel(tw_module *module, uint8_t reason)
{
    if (is_driven(module)) {
        module->work.cut = reason;
        module->work.spin_up_ms = (uint16_t)(module->ms - module->work.started_ms);
        start_rest(module);
    }
}

uint32_t tw_rest_left_ms(const tw_module *module)
{
    const uint32_t speed_rpm = magnitude(tw_measure(module, TW_WHEEL_RPM));
    const uint32_t left_ms = module->plate->rest_ms * speed_rpm / module->plate->wheel_max_rpm;
    return module->activity == TW_ACTIVITY_RESTING ? left_ms : SETTLE_MS;
}

void tw_look_at_permit(tw_module *module)
{
    if (tw_permit_left_ms(&module->allegiance, module->ms) == 0u) {
        tw_rest_wheel(module, TW_REASON_PERMIT_LAPSED);
    }
}

static void engage_brake(tw_module *module, int32_t speed_rpm)
{
    tw_work *work = &module->work;
    wheel(module, TW_WHEEL_BRAKE, 0);
    work->at_brake_rpm = (uint16_t)magnitude(speed_rpm);
    work->brake_us = module->clock_us;
    work->brake_ms = module->ms;
    work->spin_up_ms = (uint16_t)(module->ms - work->started_ms);
    tw_trace_brake(&module->trace);
    enter(module, TW_ACTIVITY_BRAKING);
    tw_carried_out(module, work->code, work->number);
}

/* Wait for the speed, and for it to be held a while; a wheel that does not come to it is stuck. */
static void step_spinning_up(tw_module *module, int32_t speed_rpm)
{
    const tw_work *work = &module->work;
    const uint32_t waited_ms = module->ms - module->since_ms;
    if (magnitude(speed_rpm - work->goal_rpm) > magnitude(work->goal_rpm) / 32u + 8u) {
        module->since_ms = module->ms;
        if (module->ms - work->started_ms > 2u * module->plate->spin_up_ms + 1000u) {
            tw_module_fault(module, TW_FAULT_WHEEL_STUCK, 1, 0);
        }
    } else if (waited_ms >= STEADY_MS) {
        if (brakes(work)) {
            engage_brake(module, speed_rpm);
        } else {
            enter(module, TW_ACTIVITY_HOLDING);
        }
    }
}

static void end_work(tw_module *module, int32_t speed_rpm)
{
    if (speed_rpm != 0) { /* the brake did not hold */
        start_rest(module);
        return;
    }
    wheel(module, TW_WHEEL_OFF, 0);
    if (module->work.cut == TW_REASON_NONE && brakes(&module->work)) {
        tw_trace_end(&module->trace);
    }
    module->says |= TW_SAY_ENDS;
    enter(module, TW_ACTIVITY_STILL);
}

static void step_settling(tw_module *module, int32_t speed_rpm)
{
    tw_work *work = &module->work;
    const uint32_t braked_ms = module->ms - work->brake_ms;
    if (!tw_measure(module, TW_SETTLED)) {
        module->since_ms = module->ms;
    }
    work->settle_ms = (uint16_t)(module->since_ms - work->brake_ms);
    if (module->ms - module->since_ms >= QUIET_MS || braked_ms >= LONGEST_SETTLE_MS) {
        end_work(module, speed_rpm);
    }
}

/* Keep the greatest of what a motion shows, and its trace. */
static void watch(tw_module *module, int32_t speed_rpm)
{
    tw_work *work = &module->work;
    tw_sample sample;
    const int32_t rate_dps = tw_measure(module, TW_RATE_DPS);
    sample.wheel_rpm = (int16_t)speed_rpm;
    sample.rate_dps = (int16_t)(work->goal_rpm < 0 ? -rate_dps : rate_dps);
    sample.tilt_ddeg = tw_turned_ddeg(module);
    sample.battery_mV = (uint16_t)tw_measure(module, TW_BATTERY_MV);
    if (magnitude(sample.tilt_ddeg) > magnitude(work->peak_tilt_ddeg)) {
        work->peak_tilt_ddeg = sample.tilt_ddeg;
    }
    if (magnitude(rate_dps) > work->peak_rate_dps) {
        work->peak_rate_dps = (uint16_t)magnitude(rate_dps);
    }
    if (module->idle_mV > sample.battery_mV + (int32_t)work->sag_mV) {
        work->sag_mV = (uint16_t)(module->idle_mV - sample.battery_mV);
    }
    while (tw_trace_due(&module->trace, module->ms)) {
        tw_trace_take(&module->trace, &sample);
    }
}

void tw_step(tw_module *module)
{
    const int32_t speed_rpm = tw_measure(module, TW_WHEEL_RPM);
    const uint32_t waited_ms = module->ms - module->since_ms;
    tw_work *work = &module->work;
    if (brakes(work) && module->activity != TW_ACTIVITY_STILL) {
        watch(module, speed_rpm);
    }
    switch (module->activity) {
    case TW_ACTIVITY_STILL:
        module->idle_mV = (uint16_t)tw_measure(module, TW_BATTERY_MV);
        break;
    case TW_ACTIVITY_SPINNING_UP:
        step_spinning_up(module, speed_rpm);
        break;
    case TW_ACTIVITY_HOLDING:
        if (waited_ms >= work->hold_ms) {
            start_rest(module);
        }
        break;
    case TW_ACTIVITY_RESTING:
        if (speed_rpm == 0) {
            end_work(module, 0);
        }
        break;
    case TW_ACTIVITY_BRAKING:
        if (speed_rpm == 0 || waited_ms >= LONGEST_BRAKE_MS) {
            work->brake_us = module->clock_us - work->brake_us;
            enter(module, TW_ACTIVITY_SETTLING);
        }
        break;
    case TW_ACTIVITY_SETTLING:
        step_settling(module, speed_rpm);
        break;
    default: /* FLASHING */
        if (waited_ms >= work->hold_ms) {
            module->plate->hooks->light(module->context, 0);
            end_work(module, 0);
        }
        break;
    }
}
