#include "tw_trace.h"

#include <string.h>

#include "tw_message.h"

/* Offsets in the head's data and in a sample, WIRE.md, "Traces". */
enum { AT_PERIOD_US = 0, AT_SAMPLES = 4, AT_BRAKE_SAMPLE = 6, AT_STARTED_MS = 8, SAMPLE_BYTES = 8 };

void tw_trace_clear(tw_trace *trace)
{
    trace->running = 0;
    trace->whole = 0;
}

void tw_trace_begin(tw_trace *trace, uint32_t epoch, uint16_t number, uint32_t now_ms)
{
    trace->running = trace->room > 0u;
    trace->whole = 0;
    trace->taken = 0;
    trace->epoch = epoch;
    trace->number = number;
    trace->started_ms = now_ms;
    trace->at_brake = UINT16_MAX;
}

uint8_t tw_trace_due(const tw_trace *trace, uint32_t now_ms)
{
    return trace->running && trace->taken < UINT16_MAX &&
           now_ms - trace->started_ms >= (uint32_t)trace->taken * TW_TRACE_PERIOD_MS;
}

void tw_trace_take(tw_trace *trace, const tw_sample *sample)
{
    trace->samples[trace->taken % trace->room] = *sample;
    trace->taken++;
}

void tw_trace_brake(tw_trace *trace)
{
    trace->at_brake = trace->taken;
}

void tw_trace_end(tw_trace *trace)
{
    trace->whole = trace->running;
    trace->running = 0;
}

/* How many samples were taken that are no longer there. */
static uint16_t lost(const tw_trace *trace)
{
    return trace->taken > trace->room ? (uint16_t)(trace->taken - trace->room) : 0u;
}

uint16_t tw_trace_chunks(const tw_trace *trace, uint32_t epoch, uint16_t number)
{
    if (!trace->whole || trace->epoch != epoch || trace->number != number) {
        return 0;
    }
    const uint16_t samples = (uint16_t)(trace->taken - lost(trace));
    return (uint16_t)(1u + (samples + TW_SAMPLES_A_CHUNK - 1u) / TW_SAMPLES_A_CHUNK);
}

static void write_head(const tw_trace *trace, uint8_t *data)
{
    const uint16_t gone = lost(trace);
    const uint16_t samples = (uint16_t)(trace->taken - gone);
    uint16_t brake = trace->at_brake > gone ? (uint16_t)(trace->at_brake - gone) : 0u;
    if (brake > samples) {
        brake = samples;
    }
    tw_put32(data + AT_PERIOD_US, TW_TRACE_PERIOD_MS * 1000u);
    tw_put16(data + AT_SAMPLES, samples);
    tw_put16(data + AT_BRAKE_SAMPLE, brake);
    tw_put32(data + AT_STARTED_MS, trace->started_ms + gone * TW_TRACE_PERIOD_MS);
}

void tw_trace_chunk(const tw_trace *trace, uint16_t chunk, uint8_t data[TW_CHUNK_BYTES])
{
    memset(data, 0, TW_CHUNK_BYTES);
    if (chunk == 0u) {
        write_head(trace, data);
        return;
    }
    uint32_t place = lost(trace) + (chunk - 1u) * (uint32_t)TW_SAMPLES_A_CHUNK;
    for (uint8_t at = 0; at < TW_CHUNK_BYTES && place < trace->taken; at += SAMPLE_BYTES, place++) {
        const tw_sample *sample = &trace->samples[place % trace->room];
        tw_put16(data + at, (uint16_t)sample->wheel_rpm);
        tw_put16(data + at + 2, (uint16_t)sample->rate_dps);
        tw_put16(data + at + 4, (uint16_t)sample->tilt_ddeg);
        tw_put16(data + at + 6, sample->battery_mV);
    }
}
