/* The checking program's module: a box that rests on face 1 with a full battery, and a wheel that
 * comes to any speed at once. */
#include <string.h>

#include "check.h"

#define MOST_SENT 32

static tw_allegiance allegiance;
static tw_module module;

/* The box around the module. */
static struct {
    uint64_t us;
    int32_t wheel_rpm;
    int sticks; /* 1: the wheel does not turn, whatever is done */
    uint8_t sent[MOST_SENT][TW_MAX_STUFFED];
    uint8_t lengths[MOST_SENT];
    int count;
    uint32_t reports_ms[MOST_SENT]; /* time_ms of the telemetry sent */
    int reports;
} box;

static uint32_t clock_us(void *context)
{
    (void)context;
    return (uint32_t)box.us;
}

static void wheel(void *context, tw_wheel what, int16_t speed_rpm)
{
    (void)context;
    box.wheel_rpm = what == TW_WHEEL_DRIVE && !box.sticks ? speed_rpm : 0;
}

static int32_t measure(void *context, tw_quantity what)
{
    static const int32_t at_rest[] = {0, 1, 1, 0, 0, 0, 4150, 2300};
    (void)context;
    return what == TW_WHEEL_RPM ? box.wheel_rpm : at_rest[what];
}

static void light(void *context, uint8_t on)
{
    (void)context;
    (void)on;
}

/* Keep what is sent, but what vectors do not list. */
static void keep_sent(void *context, const uint8_t *frame, uint8_t length)
{
    tw_reader reader = {{0}, 0, 0};
    uint8_t n = 0;
    (void)context;
    for (uint8_t at = 0; at < length; at++) {
        if (tw_read_byte(&reader, frame[at], &n) != TW_PAYLOAD) {
            continue;
        }
        const uint8_t code = reader.held[TW_AT_CODE];
        if (code == TW_CODE_TELEMETRY && box.reports < MOST_SENT) {
            box.reports_ms[box.reports++] = tw_get32(reader.held + TW_AT_TELEMETRY_TIME_MS);
        }
        if (code != TW_CODE_PRESENCE && code != TW_CODE_NAMEPLATE && code != TW_CODE_TELEMETRY &&
            code != TW_CODE_FAULT_NOTICE && code != TW_CODE_SETTING_VALUE &&
            box.count < MOST_SENT) {
            memcpy(box.sent[box.count], reader.held, n);
            box.lengths[box.count++] = n;
        }
    }
}

static uint8_t no_load(void *context, uint8_t copy, uint8_t bytes[TW_KEPT_BYTES])
{
    (void)context;
    (void)copy;
    (void)bytes;
    return 0;
}

static uint8_t no_save(void *context, uint8_t copy, const uint8_t bytes[TW_KEPT_BYTES])
{
    (void)context;
    (void)copy;
    (void)bytes;
    return 1; /* kept as long as anybody looks */
}

static const tw_hooks hooks = {clock_us,  wheel, measure, light,
                               keep_sent, NULL,  {no_load, no_save}};
static tw_plate plate = {.hooks = &hooks,
                         .name = "birch",
                         .kind = "check",
                         .firmware = 0x0100,
                         .wheel_max_rpm = 9000,
                         .spin_up_ms = 1500,
                         .rest_ms = 3000,
                         .telemetry_ms = 500,
                         .battery_low_mV = 3500,
                         .calibration = 3,
                         .can = TW_CAN_FLOOR};

/* allegiance: nobody is followed */
int run_allegiance(char **w)
{
    (void)w;
    memset(&allegiance, 0, sizeof allegiance);
    return 1;
}

static void swear(const uint8_t *payload, uint32_t now_ms)
{
    switch (payload[TW_AT_CODE]) {
    case TW_CODE_ROLL_CALL:
        (void)tw_hear_roll_call(&allegiance, payload, now_ms);
        break;
    case TW_CODE_PROBE:
        tw_hear_probe(&allegiance, payload, now_ms);
        break;
    case TW_CODE_PERMIT:
        tw_hear_permit(&allegiance, payload);
        break;
    default:
        tw_hear_release(&allegiance, payload);
        break;
    }
}

/* follows AT_MS PAYLOAD EPOCH CONSOLE OWNER_LEFT_MS PERMIT_LEFT_MS */
int run_follows(char **w)
{
    uint8_t payload[MOST];
    size_t n = 0;
    const uint32_t now_ms = number_of(w[1]);
    if (!bytes_of(w[2], payload, &n) || (n && !tw_is_request(payload, (uint8_t)n))) {
        return 0;
    }
    if (n) {
        swear(payload, now_ms);
    }
    return allegiance.epoch == number_of(w[3]) && allegiance.console == number_of(w[4]) &&
           tw_owner_left_ms(&allegiance, now_ms) == number_of(w[5]) &&
           tw_permit_left_ms(&allegiance, now_ms) == number_of(w[6]);
}

/* module IDENTITY BOOT ADDRESS: it starts at 0 ms */
int run_module(char **w)
{
    uint8_t identity[MOST];
    size_t n = 0;
    if (!bytes_of(w[1], identity, &n) || n != sizeof plate.identity) {
        return 0;
    }
    for (size_t at = 0; at < n; at++) {
        plate.identity[at] = identity[n - 1 - at];
    }
    plate.address = (uint16_t)number_of(w[3]);
    memset(&box, 0, sizeof box);
    tw_module_start(&module, &plate, NULL, number_of(w[2]), NULL, 0);
    return 1;
}

/* Whether what was sent is what is expected, in any order. */
static int all_sent(char **expected)
{
    int left = box.count;
    for (; *expected; expected++) {
        int at = 0;
        while (at < box.count && !(box.lengths[at] && same(box.sent[at], box.lengths[at], *expected))) {
            at++;
        }
        if (at == box.count) {
            return 0;
        }
        box.lengths[at] = 0; /* met */
        left--;
    }
    return left == 0;
}

/* Let time pass until then, and hear a payload. */
static int live(char **w)
{
    uint8_t payload[MOST];
    size_t n = 0;
    const uint64_t then_us = (uint64_t)number_of(w[1]) * 1000u;
    box.count = 0;
    box.reports = 0;
    if (module.plate == NULL) {
        return 0; /* no module was started */
    }
    while (box.us < then_us) {
        box.us += 1000u;
        tw_module_wake(&module);
    }
    if (!bytes_of(w[2], payload, &n)) {
        return 0;
    }
    if (n) {
        tw_module_payload(&module, payload, (uint8_t)n);
    }
    return 1;
}

/* hears AT_MS PAYLOAD SENT... */
int run_hears(char **w)
{
    return live(w) && all_sent(w + 3);
}

/* reports AT_MS PAYLOAD TIME_MS...: of telemetry, or any */
int run_reports(char **w)
{
    int met = 0;
    if (!live(w) || (w[3] && strcmp(w[3], "any") == 0)) {
        return module.plate != NULL;
    }
    for (char **time = w + 3; *time; time++, met++) {
        if (met == box.reports || box.reports_ms[met] != number_of(*time)) {
            return 0;
        }
    }
    return met == box.reports;
}

/* stops PAYLOAD STOP_NUMBER LATCHED */
int run_stops(char **w)
{
    uint8_t payload[MOST];
    size_t n = 0;
    if (module.plate == NULL || !bytes_of(w[1], payload, &n)) {
        return 0;
    }
    tw_module_payload(&module, payload, (uint8_t)n);
    return tw_get32(module.store.record + TW_KEPT_STOP_NUMBER) == number_of(w[2]) &&
           module.store.record[TW_KEPT_LATCHED] == number_of(w[3]);
}

/* notices FAULT STANDING: the board tells of a fault */
int run_notices(char **w)
{
    if (module.plate == NULL) {
        return 0;
    }
    tw_module_fault(&module, (uint8_t)number_of(w[1]), w[2][0] == '1', 0);
    return 1;
}

/* sticks: from now on the wheel does not turn */
int run_sticks(char **w)
{
    (void)w;
    box.sticks = 1;
    return 1;
}
