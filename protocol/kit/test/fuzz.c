/* A whole module under a fuzzer (libFuzzer): bytes become time, raw bytes on the link, and requests
 * that are right in form, sealed or not. Looks after each that
 *   no frame is longer than 64 bytes,
 *   no wheel is driven without a permit, while an all-stop is latched or a lock is on,
 *   what is sent can be read.
 * The first byte of the input says whether there is a seal and a storage that fails. */
#include <stdlib.h>
#include <string.h>

#include "../tw_module.h"

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

enum { SEALED = 1, STORAGE_FAILS = 2, NO_TRACE = 4, SAMPLES = 16, TURN_MS = 40, STEP_MS = 4 };

static const uint8_t key[TW_KEY_BYTES] = {1, 2, 3};

static struct {
    tw_module module;
    tw_keys keys;
    tw_counter console;
    uint32_t us;
    int32_t rpm, goal_rpm;
    tw_wheel wheel;
    uint32_t turning_us;
    uint8_t kept[2][TW_KEPT_BYTES];
    uint8_t options;
    tw_sample samples[SAMPLES];
} box;

static void must(int holds)
{
    if (!holds) {
        abort();
    }
}

static uint32_t clock_us(void *context)
{
    (void)context;
    return box.us;
}

static void set_wheel(void *context, tw_wheel what, int16_t speed_rpm)
{
    (void)context;
    box.wheel = what;
    box.goal_rpm = what == TW_WHEEL_DRIVE ? speed_rpm : 0;
    box.turning_us = box.us;
}

static int32_t measure(void *context, tw_quantity what)
{
    static const int32_t at_rest[] = {0, 1, 1, 0, 0, 0, 4000, 2300};
    (void)context;
    if (what != TW_WHEEL_RPM) {
        return at_rest[what];
    }
    if (box.us - box.turning_us >= TURN_MS * 1000u) {
        box.rpm = box.goal_rpm;
    }
    return box.rpm;
}

static void light(void *context, uint8_t on)
{
    (void)context;
    must(on <= 1u);
}

static void sent(void *context, const uint8_t *frame, uint8_t length)
{
    tw_reader reader = {{0}, 0, 0};
    uint8_t n = 0;
    (void)context;
    must(length > 0u && length <= TW_MAX_FRAME);
    for (uint8_t at = 0; at < length; at++) {
        const tw_found found = tw_read_byte(&reader, frame[at], &n);
        must(found == (at + 1u == length ? TW_PAYLOAD : TW_NOTHING));
    }
    must(n <= TW_MAX_SEALED && !(reader.held[0] & 0x80u) == !(box.options & SEALED));
}

static uint8_t load(void *context, uint8_t copy, uint8_t bytes[TW_KEPT_BYTES])
{
    (void)context;
    memcpy(bytes, box.kept[copy], TW_KEPT_BYTES);
    return 1;
}

static uint8_t save(void *context, uint8_t copy, const uint8_t bytes[TW_KEPT_BYTES])
{
    (void)context;
    if (box.options & STORAGE_FAILS && bytes[TW_KEPT_COUNT] & 1u) {
        return 0;
    }
    memcpy(box.kept[copy], bytes, TW_KEPT_BYTES);
    return 1;
}

static const tw_hooks hooks = {clock_us, set_wheel, measure, light, sent, NULL, {load, save}};
static tw_plate plate = {.hooks = &hooks,
                         .identity = {0x22, 0x11, 0, 0, 0, 0, 0, 0x80},
                         .address = 0x11,
                         .wheel_max_rpm = 9000,
                         .spin_up_ms = 100,
                         .rest_ms = 100,
                         .telemetry_ms = 500,
                         .battery_low_mV = 3500,
                         .can = TW_CAN_FLOOR | TW_CAN_HOP};

static void start(void)
{
    plate.keys = box.options & SEALED ? &box.keys : NULL;
    tw_module_start(&box.module, &plate, NULL, 7,
                    box.options & NO_TRACE ? NULL : box.samples,
                    box.options & NO_TRACE ? 0u : SAMPLES);
}

/* What must hold after each entry. */
static void look(void)
{
    const tw_module *module = &box.module;
    const uint8_t *record = module->store.record;
    if (box.wheel == TW_WHEEL_DRIVE) {
        must(tw_permit_left_ms(&module->allegiance, module->ms) > 0u);
        must(!record[TW_KEPT_LATCHED] && !record[TW_KEPT_PERSON] && !module->faults);
    }
    must(module->memory.epoch == module->allegiance.epoch);
    must(module->says == 0u);
}

/* Time in steps, as a board's loop has it: a wheel may not outlast its permit between two. */
static void pass(uint8_t steps)
{
    for (; steps > 0u; steps--) {
        box.us += STEP_MS * 1000u;
        tw_module_wake(&box.module);
        look();
    }
}

/* Put right what chance would hardly ever hit: who is spoken to, by whom, and times near now. */
static void put_right(uint8_t *payload, uint8_t length, uint8_t chance)
{
    const tw_module *module = &box.module;
    const uint8_t code = payload[TW_AT_CODE];
    const uint32_t soon_ms = module->ms + chance * 8u;
    const uint8_t is_command = (code & 0xF0u) == TW_CODE_PIVOT;
    if (is_command || code == TW_CODE_QUERY || code == TW_CODE_TRACE_ASK) {
        tw_put32(payload + TW_AT_REST_EPOCH, module->memory.epoch);
        tw_put32(payload + TW_AT_REST_BOOT, module->memory.boot);
    } else if (code >= TW_CODE_PROBE && code <= TW_CODE_GO) {
        tw_put32(payload + TW_AT_PERMIT_CONSOLE, module->allegiance.console);
    }
    if (is_command || code == TW_CODE_PROBE || code == TW_CODE_TRACE_ASK) {
        tw_put32(payload + TW_AT_PROBE_BOOT, module->memory.boot);
        tw_put16(payload + TW_AT_PROBE_IDENTITY_BITS, module->memory.identity_bits);
    }
    if (code == TW_CODE_PROBE) {
        tw_put32(payload + TW_AT_PROBE_OFFSET_MS, 0);
        tw_put16(payload + TW_AT_PROBE_BOUND_MS, chance);
    } else if (code == TW_CODE_PERMIT) {
        tw_put32(payload + TW_AT_PERMIT_EXPIRY_MS, soon_ms);
    } else if (code == TW_CODE_GO) {
        tw_put32(payload + TW_AT_GO_START_MS, soon_ms);
    } else if (is_command && length >= TW_LEN_HOP && length <= TW_LEN_PIVOT) {
        tw_put32(payload + TW_AT_PIVOT_LATEST_MS, soon_ms);
    }
}

/* A request of this code, its body from the input, put right where its first byte is even. Returns
 * how many bytes of the input were used. */
static size_t request(uint8_t code, const uint8_t *data, size_t size)
{
    uint8_t payload[TW_MAX_STUFFED] = {TW_WIRE_VERSION, code, 0x11, 0, 1, 0};
    uint8_t length = TW_HEADER_BYTES;
    while (!tw_is_request(payload, length)) { /* its length by trying */
        if (++length > TW_MAX_UNSEALED) {
            return 0;
        }
    }
    const size_t body = (size_t)(length - TW_HEADER_BYTES);
    const size_t used = body < size ? body : size;
    memcpy(payload + TW_HEADER_BYTES, data, used);
    if (used && !(data[0] & 1u)) {
        put_right(payload, length, data[0]);
    }
    if (box.options & SEALED) {
        box.console.opening = box.module.gate.epoch;
        length = tw_seal(&box.keys, &box.console, payload, length);
    }
    tw_module_payload(&box.module, payload, length);
    return used;
}

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size)
{
    if (size == 0u) {
        return 0;
    }
    memset(&box, 0, sizeof box);
    box.options = data[0];
    box.keys.keys[0] = key;
    start();
    for (size_t at = 1; at < size;) {
        const uint8_t what = data[at++];
        if (what & 0x80u) {
            pass(what & 0x7Fu);
        } else if (what & 0x40u) {
            for (uint8_t n = what & 0x3Fu; n > 0u && at < size; n--) {
                tw_module_hear(&box.module, data[at++]);
            }
        } else if (what == 0x3Fu) {
            start();
        } else if (what >= 0x38u) {
            tw_module_fault(&box.module, what & 7u, at < size && (data[at] & 1u), 0);
        } else {
            at += request(what, data + at, size - at);
        }
        if (box.module.says == 0u) {
            look();
        } else {
            pass(1);
        }
    }
    return 0;
}
