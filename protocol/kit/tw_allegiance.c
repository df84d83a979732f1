#include "tw_allegiance.h"

#include "tw_message.h"

/* Twelve days: a quarter of the way round the clock. */
#define TOO_OLD_SHIFT 30

/* Whether a console is the one followed; 0 is nobody's number, also before any was. */
static uint8_t follows(const tw_allegiance *allegiance, const uint8_t *console)
{
    const uint32_t number = tw_get32(console);
    return number != 0u && number == allegiance->console;
}

uint8_t tw_hear_roll_call(tw_allegiance *allegiance, const uint8_t *payload, uint32_t now_ms)
{
    const uint32_t epoch = tw_get32(payload + TW_AT_ROLL_CALL_EPOCH);
    const uint32_t console = tw_get32(payload + TW_AT_ROLL_CALL_CONSOLE);
    const uint8_t other = console != allegiance->console;
    if (console == 0u || epoch <= allegiance->epoch || (other && tw_owner_left_ms(allegiance, now_ms) > 0u)) {
        return 0;
    }
    allegiance->epoch = epoch;
    allegiance->console = console;
    allegiance->adopted_ms = now_ms;
    allegiance->adopted = 1;
    if (other) {
        allegiance->told = 0;
        allegiance->permit = 0;
        allegiance->slot_period_ms = 0;
    }
    return 1;
}

void tw_hear_probe(tw_allegiance *allegiance, const uint8_t *payload, uint32_t now_ms)
{
    const uint16_t bound_ms = tw_get16(payload + TW_AT_PROBE_BOUND_MS);
    if (!follows(allegiance, payload + TW_AT_PROBE_CONSOLE) ||
        bound_ms == TW_BOUND_UNKNOWN) {
        return;
    }
    allegiance->offset_ms = tw_get32(payload + TW_AT_PROBE_OFFSET_MS);
    allegiance->told = (uint16_t)(bound_ms + 1u);
    allegiance->told_ms = now_ms;
}

void tw_hear_permit(tw_allegiance *allegiance, const uint8_t *payload)
{
    const uint32_t expiry_ms = tw_get32(payload + TW_AT_PERMIT_EXPIRY_MS);
    if (follows(allegiance, payload + TW_AT_PERMIT_CONSOLE) &&
        (!allegiance->permit || tw_until(expiry_ms, allegiance->expiry_ms) > 0u)) {
        allegiance->expiry_ms = expiry_ms;
        allegiance->permit = 1;
    }
}

void tw_hear_release(tw_allegiance *allegiance, const uint8_t *payload)
{
    if (follows(allegiance, payload + TW_AT_RELEASE_CONSOLE)) {
        allegiance->permit = 0;
        allegiance->adopted = 0;
        allegiance->slot_period_ms = 0;
    }
}

void tw_hear_slot(tw_allegiance *allegiance, const uint8_t *payload)
{
    const uint16_t period_ms = tw_get16(payload + TW_AT_SLOT_PERIOD_MS);
    const uint16_t phase_ms = tw_get16(payload + TW_AT_SLOT_PHASE_MS);
    if (follows(allegiance, payload + TW_AT_SLOT_CONSOLE) &&
        (period_ms == 0u || phase_ms < period_ms)) {
        allegiance->slot_period_ms = period_ms;
        allegiance->slot_phase_ms = phase_ms;
    }
}

uint32_t tw_report_due_ms(const tw_allegiance *allegiance, uint32_t last_ms, uint32_t setting_ms)
{
    const uint32_t period_ms = allegiance->slot_period_ms;
    if (period_ms == 0u || !allegiance->told) {
        return last_ms + setting_ms;
    }
    last_ms += period_ms / 2u;
    const uint32_t passed_ms = (last_ms - allegiance->offset_ms) % period_ms;
    return last_ms + (period_ms + allegiance->slot_phase_ms - passed_ms) % period_ms;
}

/* Module time at which the permit ends; only where there is one, and a clock was told. */
static uint32_t permit_end_ms(const tw_allegiance *allegiance, uint32_t now_ms)
{
    const uint32_t age_ms = tw_until(now_ms, allegiance->told_ms);
    const uint32_t doubt_ms = allegiance->told + (age_ms >> TW_DRIFT_SHIFT);
    return allegiance->expiry_ms + allegiance->offset_ms - doubt_ms;
}

uint32_t tw_permit_left_ms(const tw_allegiance *allegiance, uint32_t now_ms)
{
    const uint32_t left_ms = permit_end_ms(allegiance, now_ms) - now_ms;
    return allegiance->told && allegiance->permit && left_ms <= TW_LONGEST_PERMIT_MS ? left_ms : 0u;
}

uint32_t tw_owner_left_ms(const tw_allegiance *allegiance, uint32_t now_ms)
{
    const uint32_t permit_ms = tw_permit_left_ms(allegiance, now_ms);
    uint32_t grace_ms = allegiance->adopted_ms + TW_OWNER_GRACE_MS - now_ms;
    if (!allegiance->adopted || grace_ms > TW_OWNER_GRACE_MS) {
        grace_ms = 0;
    }
    return grace_ms > permit_ms ? grace_ms : permit_ms;
}

void tw_allegiance_age(tw_allegiance *allegiance, uint32_t now_ms)
{
    if (now_ms - allegiance->adopted_ms > TW_OWNER_GRACE_MS) {
        allegiance->adopted = 0;
    }
    if ((now_ms - allegiance->told_ms) >> TOO_OLD_SHIFT) {
        allegiance->told = 0;
    }
    /* Past by one quarter of the way and not by two: those lie ahead. */
    if (allegiance->told && (now_ms - permit_end_ms(allegiance, now_ms)) >> TOO_OLD_SHIFT == 1u) {
        allegiance->permit = 0;
    }
}
