/* A box: a wheel, a body and a cell made up for one module. Simple, and plausible: not a model of
 * any machine. Every motion draws its luck from the seed. */
#include <math.h>
#include <string.h>
#include <time.h>

#include "host.h"

#define PI 3.14159265358979323846
#define WHEEL_MAX_RPM 9000.0
#define SPIN_UP_S 1.2       /* from rest to its limit, with all the motor has */
#define LAG_S 0.04          /* time constant with which it comes to a speed, first order */
#define REST_S 2.5          /* from its limit gently back */
#define BRAKE_S 0.035       /* from its limit, with the brake */
#define STANDING_RPM 1.0    /* below this the sensor sees no pulses */
#define TURNS_OVER_RPM 4200.0
#define TUMBLE_S 0.32
#define LUCK 0.015          /* standard deviation from one motion to the next */
#define ANGLE_NOISE_DEG 0.3 /* and of what a gyroscope adds up */
#define FULL_MV 4120.0
#define SAG_MV 190.0
#define AIR_C 22.0

uint64_t now_ns(void)
{
    struct timespec now;
    (void)clock_gettime(CLOCK_MONOTONIC, &now);
    return (uint64_t)now.tv_sec * UINT64_C(1000000000) + (uint64_t)now.tv_nsec;
}

/* A boot number from the system's random source, not 0; 0 where there is none. */
uint32_t draw_boot(void)
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

/* A sequence of 64-bit words: a counter, stirred. */
double uniform(uint64_t *random)
{
    *random += UINT64_C(0x9E3779B97F4A7C15);
    uint64_t word = *random;
    word = (word ^ word >> 30) * UINT64_C(0xBF58476D1CE4E5B9);
    word = (word ^ word >> 27) * UINT64_C(0x94D049BB133111EB);
    return (double)((word ^ word >> 31) >> 11) / 9007199254740992.0;
}

/* About normal: the sum of twelve. */
static double normal(uint64_t *random)
{
    double sum = -6.0;
    for (int at = 0; at < 12; at++) {
        sum += uniform(random);
    }
    return sum;
}

/* Where the body is within its tumble: up to the peak, and on or back to where it ends. */
static double tumbled_deg(const host_box *box, double at_s)
{
    const host_tumble *tumble = &box->tumble;
    const double part = fmin(fmax((at_s - tumble->start_s) / tumble->length_s, 0.0), 1.0);
    if (!tumble->moving) {
        return 0.0;
    }
    if (tumble->end_deg != 0.0) {
        return tumble->end_deg * 0.5 * (1.0 - cos(PI * part));
    }
    return tumble->peak_deg * sin(PI * part);
}

/* The brake is applied: enough speed turns the body over its edge, less lifts it and lets it fall. */
static void begin_tumble(host_box *box)
{
    const double sense = box->rpm < 0.0 ? -1.0 : 1.0;
    const double pull = fabs(box->rpm) / TURNS_OVER_RPM * (1.0 + LUCK * normal(&box->random));
    const int over = pull >= 1.0 && box->face_up <= 4;
    box->tumble.moving = 1;
    box->tumble.start_s = box->now_s;
    box->tumble.length_s = TUMBLE_S / fmin(fmax(sqrt(pull), 0.3), 1.5);
    box->tumble.end_deg = over ? 90.0 * sense : 0.0;
    box->tumble.peak_deg = over ? 90.0 * sense : 44.0 * fmin(pull, 1.0) * pull * sense;
}

static void end_tumble(host_box *box)
{
    const int faces = box->tumble.end_deg > 0.0 ? 1 : box->tumble.end_deg < 0.0 ? 3 : 0;
    if (box->face_up <= 4) {
        box->face_up = (box->face_up - 1 + faces) % 4 + 1;
    }
    box->turned_deg += box->tumble.end_deg + ANGLE_NOISE_DEG * normal(&box->random);
    box->tumble.moving = 0;
}

static double towards(double from, double goal, double step)
{
    return goal > from ? fmin(from + step, goal) : fmax(from - step, goal);
}

static void step_wheel(host_box *box, double step_s)
{
    switch (box->wheel) {
    case TW_WHEEL_DRIVE: {
        const double wish = (box->goal_rpm - box->rpm) * (1.0 - exp(-step_s / LAG_S));
        const double most = WHEEL_MAX_RPM / SPIN_UP_S * step_s;
        box->rpm += fmin(fmax(wish, -most), most);
        box->used_mV += 0.004 * step_s * fabs(box->rpm) / 100.0;
        box->heat_C += 0.02 * step_s;
        break;
    }
    case TW_WHEEL_BRAKE:
        box->rpm = towards(box->rpm, 0.0, box->brake_rate * step_s);
        break;
    case TW_WHEEL_REST:
        box->rpm = towards(box->rpm, 0.0, WHEEL_MAX_RPM / REST_S * step_s);
        break;
    default:
        box->rpm *= exp(-step_s / 20.0);
        break;
    }
    if (box->wheel != TW_WHEEL_DRIVE && fabs(box->rpm) < STANDING_RPM) {
        box->rpm = 0.0;
    }
}

void step_box(host_box *box, double step_s)
{
    box->now_s += step_s;
    step_wheel(box, step_s);
    box->heat_C *= exp(-step_s / 300.0);
    if (box->tumble.moving && box->now_s >= box->tumble.start_s + box->tumble.length_s) {
        end_tumble(box);
    }
}

/* -- Hooks ------------------------------------------------------------------------------------ */

static uint32_t clock_us(void *context)
{
    const host_box *box = context;
    return (uint32_t)((now_ns() - box->world->start_ns) / 1000u);
}

static void set_wheel(void *context, tw_wheel what, int16_t speed_rpm)
{
    host_box *box = context;
    box->wheel = what;
    box->goal_rpm = speed_rpm;
    if (what == TW_WHEEL_BRAKE) {
        box->brake_rate = WHEEL_MAX_RPM / BRAKE_S * (1.0 + LUCK * normal(&box->random));
        begin_tumble(box);
    }
}

static double battery_mV(const host_box *box)
{
    const int pulls = box->wheel == TW_WHEEL_DRIVE && fabs(box->goal_rpm - box->rpm) > 20.0;
    const double load = fabs(box->rpm) / WHEEL_MAX_RPM;
    return FULL_MV - box->used_mV - (pulls ? SAG_MV * (0.3 + 0.7 * load) : 10.0 * load);
}

static double measured(host_box *box, tw_quantity what)
{
    const double angle_deg = tumbled_deg(box, box->now_s);
    switch (what) {
    case TW_WHEEL_RPM:
        return box->rpm;
    case TW_FACE_UP:
        return box->tumble.moving ? 0 : box->face_up;
    case TW_SETTLED:
        return !box->tumble.moving;
    case TW_TILT_DDEG: /* from the nearest face */
        return 10.0 * (fabs(angle_deg) > 45.0 ? angle_deg - box->tumble.end_deg : angle_deg);
    case TW_TURNED_DDEG:
        return 10.0 * (box->turned_deg + angle_deg);
    case TW_RATE_DPS:
        return (tumbled_deg(box, box->now_s + 0.0005) - tumbled_deg(box, box->now_s - 0.0005)) / 0.001;
    case TW_BATTERY_MV:
        return battery_mV(box) + normal(&box->random);
    default:
        return 100.0 * (AIR_C + box->heat_C) + 5.0 * normal(&box->random);
    }
}

static int32_t measure(void *context, tw_quantity what)
{
    return (int32_t)lround(measured(context, what));
}

static void light(void *context, uint8_t on)
{
    (void)context;
    (void)on; /* nobody sees it */
}

static void send(void *context, const uint8_t *frame, uint8_t length)
{
    host_world *world = ((host_box *)context)->world;
    if (uniform(&world->random) < world->options.loss) {
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
    const host_box *box = context;
    return (uint8_t)load_kept(box->world, box->place, copy, bytes);
}

static uint8_t save(void *context, uint8_t copy, const uint8_t bytes[TW_KEPT_BYTES])
{
    const host_box *box = context;
    return (uint8_t)save_kept(box->world, box->place, copy, bytes);
}

static const tw_hooks hooks = {clock_us, set_wheel, measure, light, send, carried_out, {load, save}};

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
    for (size_t at = 0; at < sizeof box->plate.identity; at++) {
        box->plate.identity[at] = (uint8_t)(identity >> (8 * at));
    }
    name_box(box, options);
    tw_module_start(&box->module, &box->plate, box, draw_boot(), box->samples, SAMPLES);
}
