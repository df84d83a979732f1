/* The checking program's memory that keeps, whose power fails where a line says, and its traces. */
#include <string.h>

#include "check.h"

#define MOST_SAMPLES 1000

static struct {
    uint8_t copies[2][TW_KEPT_BYTES];
    uint8_t written; /* how many bytes of a write are done before the power fails */
} kept;

static uint8_t load(void *context, uint8_t copy, uint8_t bytes[TW_KEPT_BYTES])
{
    (void)context;
    memcpy(bytes, kept.copies[copy], TW_KEPT_BYTES);
    return 1;
}

static uint8_t save(void *context, uint8_t copy, const uint8_t bytes[TW_KEPT_BYTES])
{
    (void)context;
    memcpy(kept.copies[copy], bytes, kept.written);
    return kept.written == TW_KEPT_BYTES;
}

static const tw_storage storage = {load, save};

/* store: as it is delivered, all ones */
int run_store(char **w)
{
    (void)w;
    memset(&kept, 0xFF, sizeof kept);
    return 1;
}

/* tears WRITTEN VALUE TRIES FOUND: a number is stored, so many bytes of each try are written; after
 * the next start this number is found, or "-" for no whole record */
int run_tears(char **w)
{
    tw_store store;
    uint8_t done = 0;
    (void)tw_store_open(&store, &storage, NULL);
    kept.written = (uint8_t)number_of(w[1]);
    for (uint32_t tries = number_of(w[3]); tries > 0u; tries--) {
        done = tw_store_put32(&store, TW_KEPT_STOP_NUMBER, number_of(w[2]));
    }
    const uint8_t whole = tw_store_open(&store, &storage, NULL);
    if (done != (kept.written == TW_KEPT_BYTES)) {
        return 0;
    }
    return w[4][0] == '-' ? !whole
                          : whole && tw_get32(store.record + TW_KEPT_STOP_NUMBER) == number_of(w[4]);
}

/* trace ROOM SAMPLES AT_BRAKE STARTED_MS CHUNK...; sample n is n, -n, 2n, 3000 + n */
int run_trace(char **w)
{
    static tw_sample samples[MOST_SAMPLES];
    tw_trace trace = {.samples = samples, .room = (uint16_t)number_of(w[1])};
    const uint32_t count = number_of(w[2]);
    const uint32_t started_ms = number_of(w[4]);
    uint16_t chunk = 0;
    tw_trace_begin(&trace, 5, 6, started_ms);
    for (uint32_t n = 0; n < count; n++) {
        const uint32_t now_ms = started_ms + n * TW_TRACE_PERIOD_MS;
        const tw_sample sample = {(int16_t)n, (int16_t)-(int32_t)n, (int16_t)(2u * n),
                                  (uint16_t)(3000u + n)};
        if (n == number_of(w[3])) {
            tw_trace_brake(&trace);
        }
        if ((n && tw_trace_due(&trace, now_ms - 1u)) || !tw_trace_due(&trace, now_ms)) {
            return 0;
        }
        tw_trace_take(&trace, &sample);
    }
    if (tw_trace_chunks(&trace, 5, 6) != 0u) {
        return 0; /* it is still under way */
    }
    tw_trace_end(&trace);
    for (char **expected = w + 5; *expected; expected++, chunk++) {
        uint8_t data[TW_CHUNK_BYTES];
        tw_trace_chunk(&trace, chunk, data);
        if (!same(data, sizeof data, *expected)) {
            return 0;
        }
    }
    return tw_trace_chunks(&trace, 5, 6) == chunk && tw_trace_chunks(&trace, 5, 7) == 0u &&
           tw_trace_chunks(&trace, 4, 6) == 0u;
}
