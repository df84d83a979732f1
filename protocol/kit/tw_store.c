#include "tw_store.h"

#include <string.h>

#include "tw_frame.h"
#include "tw_message.h"

/* Read one copy into the record; 1 where it is whole. */
static uint8_t read_copy(tw_store *store, uint8_t copy)
{
    return store->storage->load(store->context, copy, store->record) &&
           tw_crc32c(store->record, TW_KEPT_CHECK) == tw_get32(store->record + TW_KEPT_CHECK);
}

uint8_t tw_store_open(tw_store *store, const tw_storage *storage, void *context)
{
    store->storage = storage;
    store->context = context;
    store->unsaved = 0;
    const uint8_t second = read_copy(store, 1);
    const uint32_t count = tw_get32(store->record + TW_KEPT_COUNT);
    const uint8_t first = read_copy(store, 0);
    uint8_t whole = first;
    if (second && (!first || count > tw_get32(store->record + TW_KEPT_COUNT))) {
        whole = read_copy(store, 1); /* once more: so one buffer does */
    }
    if (!whole) {
        memset(store->record, 0, sizeof store->record);
    }
    return whole;
}

static uint8_t write_copy(tw_store *store)
{
    const uint32_t count = tw_get32(store->record + TW_KEPT_COUNT) + 1u;
    tw_put32(store->record + TW_KEPT_COUNT, count);
    tw_put32(store->record + TW_KEPT_CHECK, tw_crc32c(store->record, TW_KEPT_CHECK));
    if (store->storage->save(store->context, (uint8_t)(count & 1u), store->record)) {
        return 1;
    }
    /* The other copy may be the only whole one now: the next write goes to this one again. */
    tw_put32(store->record + TW_KEPT_COUNT, count - 1u);
    return 0;
}

uint8_t tw_store_put(tw_store *store, uint8_t at, const uint8_t *bytes, uint8_t length)
{
    if (!store->unsaved && memcmp(store->record + at, bytes, length) == 0) {
        return 1;
    }
    memcpy(store->record + at, bytes, length);
    store->unsaved = !write_copy(store);
    return !store->unsaved;
}

uint8_t tw_store_put32(tw_store *store, uint8_t at, uint32_t value)
{
    uint8_t bytes[4];
    tw_put32(bytes, value);
    return tw_store_put(store, at, bytes, sizeof bytes);
}
