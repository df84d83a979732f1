/* A board: what reaches the module besides its wheel and body, how it starts, and what can be wrong
 * with it. */
#include <string.h>

#include "host.h"

static const struct {
    const char *name;
    unsigned bit;
} faults[] = {{"silent", FAULT_SILENT},
              {"restart_on_brake", FAULT_RESTART_ON_BRAKE},
              {"lost_sensor", FAULT_LOST_SENSOR},
              {"drop_storage", FAULT_DROP_STORAGE}};

unsigned fault_of(const char *name)
{
    for (size_t at = 0; at < sizeof faults / sizeof *faults; at++) {
        if (strcmp(name, faults[at].name) == 0) {
            return faults[at].bit;
        }
    }
    return 0;
}

/* A boot number from the system's random source, not 0; 0 where there is none. */
static uint32_t draw_boot(void)
{
    uint32_t boot = 0;
    FILE *file = fopen("/dev/urandom", "rb");
    if (file != NULL) {
        if (fread(&boot, sizeof boot, 1, file) != 1) {
            boot = 0;
        }
        (void)fclose(file);
    }
    return boot & 0x7FFFFFFFu;
}

static void light(void *context, uint8_t on)
{
    (void)context;
    (void)on; /* nobody sees it */
}

static void send(void *context, const uint8_t *frame, uint8_t length)
{
    host_box *box = context;
    host_world *world = box->world;
    const int is_out = box->called && box->faults & FAULT_SILENT;
    /* Version and code are never 0, so they stand where the payload had them. */
    box->called = box->called || frame[1 + TW_AT_CODE] == TW_CODE_NAMEPLATE;
    if (is_out || uniform(&world->random) < world->options.loss) {
        return;
    }
    write_line(&world->line, frame, length, now_ns());
    if (uniform(&world->random) < world->options.repeat) {
        write_line(&world->line, frame, length, now_ns());
    }
}

static void carried_out(void *context, uint8_t code, uint16_t number)
{
    const host_box *box = context;
    count_command(box->world, box, code, number);
}

static uint8_t load(void *context, uint8_t copy, uint8_t bytes[TW_KEPT_BYTES])
{
    return (uint8_t)load_kept(context, copy, bytes);
}

static uint8_t save(void *context, uint8_t copy, const uint8_t bytes[TW_KEPT_BYTES])
{
    host_box *box = context;
    if (box->saves++ > 0 && box->faults & FAULT_DROP_STORAGE) {
        return 0;
    }
    return (uint8_t)save_kept(box, copy, bytes);
}

static const tw_hooks hooks = {box_clock_us, box_set_wheel, box_measure, light,
                               send,         carried_out,   {load, save}};

/* The name of each module after the first has its place behind it, within 12 bytes. */
static void name_box(host_box *box, const host_options *options)
{
    char name[2 * TW_TEXT_BYTES] = {0};
    char suffix[8] = {0};
    if (box->place > 0) {
        (void)snprintf(suffix, sizeof suffix, "-%u", box->place + 1u);
    }
    (void)snprintf(name, sizeof name, "%.*s%s", (int)(TW_TEXT_BYTES - strlen(suffix)),
                   options->name, suffix);
    memcpy(box->plate.name, name, TW_TEXT_BYTES);
    memset(name, 0, sizeof name);
    (void)snprintf(name, sizeof name, "%.12s", options->kind);
    memcpy(box->plate.kind, name, TW_TEXT_BYTES);
}

static void boot(host_box *box)
{
    box->saves = 0;
    tw_module_start(&box->module, &box->plate, box, draw_boot(), box->samples, SAMPLES);
}

void start_box(host_box *box, host_world *world, unsigned place)
{
    const host_options *options = &world->options;
    const uint64_t identity = options->identity + place;
    const tw_plate plate = {.hooks = &hooks,
                            .keys = options->keys ? &world->keys : NULL,
                            .address = (uint16_t)(options->address + place),
                            .firmware = 0x0100,
                            .wheel_max_rpm = (uint16_t)WHEEL_MAX_RPM,
                            .spin_up_ms = (uint16_t)(SPIN_UP_S * 1000.0),
                            .rest_ms = (uint16_t)(REST_S * 1000.0),
                            .telemetry_ms = 500,
                            .battery_low_mV = 3500,
                            .calibration = 1,
                            .can = TW_CAN_FLOOR};
    memset(box, 0, sizeof *box);
    box->plate = plate;
    box->world = world;
    box->place = place;
    box->random = options->seed + place * UINT64_C(0xD1B54A32D192ED03);
    box->face_up = 1;
    box->faults = options->faults;
    for (size_t at = 0; at < sizeof box->plate.identity; at++) {
        box->plate.identity[at] = (uint8_t)(identity >> (8 * at));
    }
    name_box(box, options);
    boot(box);
}

void look_at_brake(host_box *box)
{
    if (!box->braked) {
        return;
    }
    box->braked = 0;
    if (box->faults & FAULT_RESTART_ON_BRAKE) {
        box->faults &= ~(unsigned)FAULT_RESTART_ON_BRAKE;
        boot(box);
        tw_module_fault(&box->module, TW_FAULT_WATCHDOG, 0, 0);
    }
    if (box->faults & FAULT_LOST_SENSOR) {
        box->faults &= ~(unsigned)FAULT_LOST_SENSOR;
        tw_module_fault(&box->module, TW_FAULT_SENSOR_LOST, 1, 0);
    }
}
