/* What a module keeps, and what it says of its condition: settings, lock, flags. */
#include <string.h>

#include "tw_inner.h"

/* Bounds of the settings; 0 where the plate has them. WIRE.md names them, the numbers are ours. */
static const int32_t bounds[][2] = {
    {100, 0}, {20, 60000}, {3000, 4200}, {INT32_MIN, INT32_MAX}, {0, 0}};

int32_t tw_setting(const tw_module *module, uint8_t setting)
{
    if (setting == TW_SETTING_CALIBRATION) {
        return module->plate->calibration;
    }
    return (int32_t)tw_get32(module->store.record + TW_KEPT_SETTINGS + 4u * (setting - 1u));
}

void tw_setting_row(const tw_module *module, uint8_t setting, int32_t row[3])
{
    row[0] = 0;
    row[1] = 1;
    row[2] = 0;
    if (setting == 0u || setting > TW_SETTING_CALIBRATION) {
        return;
    }
    row[0] = tw_setting(module, setting);
    row[1] = bounds[setting - 1u][0];
    row[2] = bounds[setting - 1u][1];
    if (setting == TW_SETTING_WHEEL_LIMIT_RPM) {
        row[2] = module->plate->wheel_max_rpm;
    } else if (setting == TW_SETTING_CALIBRATION) {
        row[1] = row[2] = row[0];
    }
}

uint8_t tw_keep(tw_module *module, uint8_t at, const uint8_t *bytes, uint8_t length)
{
    const uint8_t kept = tw_store_put(&module->store, at, bytes, length);
    if (!kept) {
        tw_module_fault(module, TW_FAULT_STORAGE_BAD, 1, 0);
    }
    return kept;
}

uint8_t tw_is_locked(const tw_module *module)
{
    for (uint8_t at = 0; at < TW_TEXT_BYTES; at++) {
        if (module->store.record[TW_KEPT_PERSON + at] != 0u) {
            return 1;
        }
    }
    return 0;
}

uint8_t tw_flags(const tw_module *module)
{
    const tw_allegiance *allegiance = &module->allegiance;
    uint8_t flags = 0;
    if (module->store.record[TW_KEPT_LATCHED]) {
        flags |= TW_FLAG_LATCHED;
    }
    if (module->idle_mV < tw_setting(module, TW_SETTING_BATTERY_LOW_MV)) {
        flags |= TW_FLAG_BATTERY_LOW;
    }
    if (!tw_measure(module, TW_SETTLED)) {
        flags |= TW_FLAG_UNSETTLED;
    }
    if (tw_is_locked(module)) {
        flags |= TW_FLAG_LOCKED_OUT;
    }
    if (module->faults) {
        flags |= TW_FLAG_FAULTY;
    }
    if (tw_permit_left_ms(allegiance, module->ms)) {
        flags |= TW_FLAG_PERMITTED;
    }
    if (allegiance->told) {
        flags |= TW_FLAG_CLOCK_TOLD;
    }
    return flags;
}
