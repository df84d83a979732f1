/* The reports of a module as tables: which fields each has, and where their values come from.
 *
 * Owns the layout of what is said. Knows not when it is said.
 */
#include <stddef.h>
#include <string.h>

#include "tw_inner.h"

/* How a field of a report comes about; from: where its value is. Fields follow one another on the
 * wire without gaps, as WIRE.md lists them, so a table in that order says all of a message. */
enum {
    END = 0,
    U8,     /* a number of the module; from: offset in tw_module */
    U16,
    U32,
    BYTES4, /* bytes as they are; from: offset in tw_module */
    TEXT,
    PLATE8, /* bytes of the plate; from: offset in tw_plate */
    PLATE24,
    SENSED8, /* from: tw_quantity */
    SENSED16,
    MADE8, /* from: what make() knows */
    MADE16,
    MADE32,
    GIVEN8, /* the next of the numbers given */
    GIVEN16,
    GIVEN32 = 15
};
enum { FLAGS, LOCKED, ACTIVITY, OWNER_LEFT, LIMIT, FIRMWARE, TURNED, TIME_LOW, TIME_HIGH, HELD };

static const uint8_t widths[] = {0, 1, 2, 4, 4, TW_TEXT_BYTES, 8, 2 * TW_TEXT_BYTES,
                                 1, 2, 1, 2, 4, 1, 2, 4};

#define FIELD(how, from) (uint16_t)((how) << 12 | (uint16_t)(from))
#define OWN(how, field) FIELD(how, offsetof(tw_module, field))
#define KEPT(how, place) FIELD(how, offsetof(tw_module, store.record) + (place))
#define NAMED_BOOT OWN(U32, memory.boot)
#define NAMED_BITS OWN(U16, memory.identity_bits)

/* Each begins with its code. */
static const uint16_t presence[] = {
    TW_CODE_PRESENCE, FIELD(PLATE8, offsetof(tw_plate, identity)), NAMED_BOOT,
    OWN(U32, allegiance.epoch), OWN(U32, allegiance.console), KEPT(BYTES4, TW_KEPT_STOP_NUMBER),
    OWN(U32, ms), FIELD(MADE16, OWNER_LEFT), FIELD(MADE8, FLAGS), FIELD(SENSED8, TW_FACE_UP), END};
static const uint16_t nameplate[] = {
    TW_CODE_NAMEPLATE, FIELD(PLATE8, offsetof(tw_plate, identity)), FIELD(MADE16, LIMIT),
    FIELD(MADE16, FIRMWARE), FIELD(PLATE24, offsetof(tw_plate, name)), END};
static const uint16_t telemetry[] = {
    TW_CODE_TELEMETRY, NAMED_BOOT, OWN(U16, sequence), OWN(U32, ms), FIELD(MADE8, ACTIVITY),
    FIELD(MADE8, FLAGS), FIELD(SENSED8, TW_FACE_UP), FIELD(SENSED16, TW_WHEEL_RPM),
    FIELD(SENSED16, TW_BATTERY_MV), FIELD(SENSED16, TW_TEMPERATURE_CC),
    FIELD(SENSED16, TW_TILT_DDEG), NAMED_BITS, END};
static const uint16_t stopped[] = {
    TW_CODE_STOPPED, KEPT(BYTES4, TW_KEPT_STOP_NUMBER), KEPT(U8, TW_KEPT_LATCHED),
    OWN(U8, activity), FIELD(SENSED16, TW_WHEEL_RPM), NAMED_BOOT, NAMED_BITS, END};
static const uint16_t echo[] = {
    TW_CODE_ECHO, NAMED_BOOT, OWN(U16, asked), NAMED_BITS, FIELD(MADE32, TIME_LOW),
    FIELD(MADE32, TIME_HIGH), FIELD(MADE32, HELD), END};
static const uint16_t lock_state[] = {
    TW_CODE_LOCK_STATE, NAMED_BOOT, NAMED_BITS, FIELD(MADE8, LOCKED),
    KEPT(TEXT, TW_KEPT_PERSON), END};
static const uint16_t facts[] = {
    TW_CODE_FACTS, OWN(U32, work.epoch), NAMED_BOOT, OWN(U16, work.number), OWN(U8, work.cut),
    OWN(U8, work.face_before), FIELD(SENSED8, TW_FACE_UP), FIELD(SENSED8, TW_SETTLED),
    FIELD(MADE16, TURNED), OWN(U16, work.peak_tilt_ddeg), OWN(U16, work.peak_rate_dps),
    OWN(U16, work.at_brake_rpm), OWN(U32, work.brake_us), OWN(U16, work.spin_up_ms),
    OWN(U16, work.settle_ms), OWN(U16, work.sag_mV), OWN(U32, work.started_ms), END};

static const uint16_t setting_value[] = {
    TW_CODE_SETTING_VALUE, NAMED_BOOT, NAMED_BITS, FIELD(GIVEN8, 0), FIELD(GIVEN8, 0),
    FIELD(GIVEN32, 0), FIELD(GIVEN32, 0), FIELD(GIVEN32, 0), END};
static const uint16_t fault_notice[] = {
    TW_CODE_FAULT_NOTICE, NAMED_BOOT, NAMED_BITS, FIELD(GIVEN8, 0), FIELD(GIVEN8, 0),
    FIELD(GIVEN32, 0), FIELD(GIVEN16, 0), END};
static const uint16_t trace_chunk[] = { /* but for its data */
    TW_CODE_TRACE_CHUNK, NAMED_BOOT, FIELD(GIVEN16, 0), NAMED_BITS, FIELD(GIVEN16, 0),
    FIELD(GIVEN16, 0), END};
static const uint16_t *const tables[] = {presence, nameplate, telemetry, stopped, echo, lock_state,
                                         facts, setting_value, fault_notice, trace_chunk};

/* Offsets must fit beside their kind. */
typedef char offsets_fit[sizeof(tw_module) < 0x1000u && sizeof(tw_plate) < 0x1000u ? 1 : -1];

/* A value that lies nowhere as it is said. */
static uint32_t make(const tw_module *module, uint16_t what)
{
    switch (what) {
    case FLAGS:
        return tw_flags(module);
    case LOCKED:
        return tw_is_locked(module);
    case ACTIVITY:
        return module->staged && module->activity == TW_ACTIVITY_STILL ? TW_ACTIVITY_STAGED
                                                                       : module->activity;
    case OWNER_LEFT:
        return tw_owner_left_ms(&module->allegiance, module->ms); /* at most 60,000 */
    case LIMIT:
        return (uint32_t)tw_setting(module, TW_SETTING_WHEEL_LIMIT_RPM);
    case FIRMWARE:
        return module->plate->firmware;
    case TURNED:
        return (uint32_t)tw_turned_ddeg(module);
    case TIME_LOW:
        return (uint32_t)module->us;
    case TIME_HIGH:
        return (uint32_t)(module->us >> 32);
    default:
        return module->plate->hooks->clock_us(module->context) - module->clock_us;
    }
}

/* The value of a field that is a number. */
static uint32_t value_of(const tw_module *module, uint8_t how, uint16_t from)
{
    const void *at = (const uint8_t *)module + from;
    switch (how) {
    case U8:
        return *(const uint8_t *)at;
    case U16:
        return *(const uint16_t *)at;
    case U32:
        return *(const uint32_t *)at;
    case SENSED8:
    case SENSED16:
        return (uint32_t)tw_measure(module, (tw_quantity)from);
    default:
        return make(module, from);
    }
}

uint8_t tw_write(tw_module *module, tw_report report, const int32_t *given)
{
    uint8_t *p = module->frame + 1;
    const uint16_t *field = tables[report];
    uint8_t at = TW_HEADER_BYTES;
    p[TW_AT_CODE] = (uint8_t)*field;
    while (*++field != END) {
        const uint8_t how = (uint8_t)(*field >> 12);
        const uint16_t from = *field & 0x0FFFu;
        const uint8_t width = widths[how];
        if (how >= BYTES4 && how <= PLATE24) {
            const void *base = how >= PLATE8 ? (const void *)module->plate : module;
            memcpy(p + at, (const uint8_t *)base + from, width);
        } else {
            uint32_t value =
                how >= GIVEN8 ? (uint32_t)*given++ : value_of(module, how, from);
            for (uint8_t n = 0; n < width; n++) {
                p[at + n] = (uint8_t)value;
                value >>= 8;
            }
        }
        at = (uint8_t)(at + width);
    }
    return at;
}
