/* A whole module: everything WIRE.md asks of one, over hooks into a board.
 *
 * Owns the dispatch of messages, the interlocks, the activities of the wheel, and what is said.
 * Knows no hardware: clock, wheel, sensors, storage and link are the board's, by hooks. No heap,
 * no recursion; all memory is the caller's. Not to be entered from an interrupt while it runs.
 */
#ifndef TW_MODULE_H
#define TW_MODULE_H

#include <stdint.h>

#include "tw_allegiance.h"
#include "tw_frame.h"
#include "tw_memory.h"
#include "tw_seal.h"
#include "tw_store.h"
#include "tw_trace.h"

/* What is done with the wheel. DRIVE: the motor brings it to the speed given, and holds it there.
 * REST: the motor brings it gently to a stop. BRAKE: the brake, until OFF. */
typedef enum { TW_WHEEL_OFF = 0, TW_WHEEL_DRIVE, TW_WHEEL_REST, TW_WHEEL_BRAKE } tw_wheel;

/* What a board measures, in the unit of the name. */
typedef enum {
    TW_WHEEL_RPM = 0,  /* signed; exactly 0 where it stands */
    TW_FACE_UP,        /* 1 to 6, 0 for none */
    TW_SETTLED,        /* 1 where the body is at rest on a face */
    TW_TILT_DDEG,      /* from the nearest face */
    TW_TURNED_DDEG,    /* angle turned, forward positive, from any zero; may wrap as 16 bits do */
    TW_RATE_DPS,       /* body rate, forward positive */
    TW_BATTERY_MV,
    TW_TEMPERATURE_CC  /* 0.01 degrees C */
} tw_quantity;

typedef struct {
    uint32_t (*clock_us)(void *context); /* wraps; looked at more often than once an hour */
    void (*wheel)(void *context, tw_wheel what, int16_t speed_rpm);
    int32_t (*measure)(void *context, tw_quantity what);
    void (*light)(void *context, uint8_t on); /* light and beep */
    void (*send)(void *context, const uint8_t *frame, uint8_t length);
    void (*carried_out)(void *context, uint8_t code, uint16_t number); /* may be NULL */
    tw_storage storage;
} tw_hooks;

/* What a module can do, bits of tw_plate.can. */
enum {
    TW_CAN_FLOOR = 1u << TW_STANDS_ON_FLOOR,
    TW_CAN_WALL = 1u << TW_STANDS_ON_WALL,
    TW_CAN_CREST = 1u << TW_STANDS_ON_CREST,
    TW_CAN_FLAT = 1u << TW_STANDS_ON_FLAT,
    TW_CAN_HOP = 1u << 5,
    TW_CAN_TWIST = 1u << 6
};

/* What is written on the box, and does not change: may lie in flash. */
typedef struct {
    const tw_hooks *hooks;
    const tw_keys *keys; /* NULL: unsealed */
    uint8_t can;         /* TW_CAN_ bits */
    uint16_t address;
    uint16_t firmware;
    uint16_t wheel_max_rpm;  /* at most 32,767 */
    uint16_t spin_up_ms;     /* from rest to wheel_max_rpm, about */
    uint16_t rest_ms;        /* and gently back */
    uint16_t telemetry_ms;   /* as delivered; a setting */
    uint16_t battery_low_mV; /* as delivered; a setting */
    uint16_t calibration;
    uint8_t identity[8]; /* as on the wire, low byte first */
    uint8_t name[TW_TEXT_BYTES];
    uint8_t kind[TW_TEXT_BYTES];
} tw_plate;

/* What was begun with the wheel or the light, and what was measured of it. */
typedef struct {
    uint8_t code; /* of the command; 0: nothing is owed */
    uint8_t cut;  /* the reason */
    uint8_t face_before;
    uint16_t number;
    uint16_t hold_ms;
    uint16_t settle_ms;
    uint16_t spin_up_ms;
    uint16_t peak_rate_dps;
    uint16_t at_brake_rpm;
    uint16_t sag_mV;
    int16_t goal_rpm;
    int16_t turned_from_ddeg;
    int16_t peak_tilt_ddeg;
    uint32_t epoch;
    uint32_t started_ms;
    uint32_t brake_us; /* first the clock as the brake engaged, then how long it took */
    uint32_t brake_ms;
} tw_work;

/* A module. Its small fields come first, where a small processor reaches them with one
 * instruction. */
typedef struct {
    uint8_t activity;
    uint8_t staged;    /* 0: nothing, 1: waits for a Go, 2: waits for its start */
    uint8_t stage_cut; /* why what was staged was given up */
    uint8_t faults;    /* bit n - 1: fault n stands */
    uint8_t tell;      /* faults to be told of */
    uint8_t mute;      /* 1: its boot number is not stored, so it seals nothing */
    uint16_t says;     /* what is to be said, bits */
    const tw_plate *plate;
    void *context;
    tw_work work;
    uint16_t part_us;
    uint16_t sequence;
    uint16_t idle_mV;   /* battery without load */
    uint32_t ms;        /* module time, modulo 2^32 */
    uint32_t since_ms;  /* when the activity began, or what it waits for was last not so */
    uint32_t clock_us;
    uint32_t report_ms; /* last telemetry that was due */
    uint32_t start_ms;  /* of what is staged */
    uint64_t us;        /* module time */
    tw_allegiance allegiance;
    tw_memory memory;
    tw_gate gate;
    tw_counter counter;
    tw_store store;
    tw_trace trace;
    uint32_t faults_ms[TW_FAULT_BRAKE_WEAK]; /* when each was noticed */
    int16_t details[TW_FAULT_BRAKE_WEAK];
    uint8_t stage[TW_LEN_PIVOT]; /* the command that is staged */
    tw_reader reader;
    uint8_t frame[TW_MAX_FRAME]; /* what is being sent; its payload from the second byte on */
} tw_module;

/* Start. drawn_boot: a boot number from a good random source, for a board whose storage holds
 * none; 0 where it has no such source: then it counts from 1. samples: room for a trace, may be
 * NULL with room 0. A wheel that turns is brought to rest. */
void tw_module_start(tw_module *module, const tw_plate *plate, void *context, uint32_t drawn_boot,
                     tw_sample *samples, uint16_t room);

/* Take one byte from the link. */
void tw_module_hear(tw_module *module, uint8_t byte);

/* Take one checked payload, sealed or not. It is changed where it stands. */
void tw_module_payload(tw_module *module, uint8_t *payload, uint8_t length);

/* Let time pass. Call it every millisecond or two while a wheel turns or something is staged, and
 * always where the console hands out telemetry slots, which are kept as well as this is called;
 * else whenever convenient, at least every 20 ms. */
void tw_module_wake(tw_module *module);

/* The board has noticed a fault (standing 1), that it is over, or that it was a moment (0). */
void tw_module_fault(tw_module *module, uint8_t fault, uint8_t standing, int16_t detail);

#endif
