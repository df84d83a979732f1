/* The trace of a module's last motion (WIRE.md, "Traces").
 *
 * Owns the samples of one motion, in the caller's memory, and their chunks. Samples are taken at a
 * fixed period from the start on; where there are more than fit, the last ones take the place of
 * the first. Knows no sensors and no links.
 */
#ifndef TW_TRACE_H
#define TW_TRACE_H

#include <stdint.h>

#include "tw_wire.h"

#define TW_TRACE_PERIOD_MS 4u

/* One sample as in WIRE.md; signs as in Facts and Telemetry. */
typedef struct {
    int16_t wheel_rpm;
    int16_t rate_dps;
    int16_t tilt_ddeg;
    uint16_t battery_mV;
} tw_sample;

/* Where samples lie, and whose they are. Set samples and room; tw_trace_begin does the rest. */
typedef struct {
    tw_sample *samples; /* NULL: no trace is kept */
    uint32_t epoch;
    uint32_t started_ms;
    uint16_t room;      /* how many fit */
    uint16_t taken;     /* since the start, more than fit as the case may be; stops at 65535 */
    uint16_t at_brake;  /* how many had been taken when the brake engaged */
    uint16_t number;
    uint8_t running; /* 1: samples are being taken */
    uint8_t whole;   /* 1: the motion is over, and the trace may be asked for */
} tw_trace;

/* Forget what was kept, and what is under way. */
void tw_trace_clear(tw_trace *trace);

/* A motion begins. */
void tw_trace_begin(tw_trace *trace, uint32_t epoch, uint16_t number, uint32_t now_ms);

/* Whether a sample is due; then take it. Where several are due, each is asked for. */
uint8_t tw_trace_due(const tw_trace *trace, uint32_t now_ms);
void tw_trace_take(tw_trace *trace, const tw_sample *sample);

/* The brake engaged; the motion is over: from now on its trace may be asked for. */
void tw_trace_brake(tw_trace *trace);
void tw_trace_end(tw_trace *trace);

/* How many chunks the trace of a command has; 0 where this is not its trace. */
uint16_t tw_trace_chunks(const tw_trace *trace, uint32_t epoch, uint16_t number);

/* Write the data of one of these chunks. */
void tw_trace_chunk(const tw_trace *trace, uint16_t chunk, uint8_t data[TW_CHUNK_BYTES]);

#endif
