/* What the files of a module share among themselves; not for a board. */
#ifndef TW_INNER_H
#define TW_INNER_H

#include "tw_module.h"

/* What a module has to say, in the order in which it is said: bits of tw_module.says. Saying is
 * put off to the end of each entry, so that nothing is sent from deep within. */
enum {
    TW_SAY_REPLY = 1u << 0, /* it stands in the frame already */
    TW_SAY_STOPPED = 1u << 1,
    TW_SAY_PRESENCE = 1u << 2,
    TW_SAY_NAMEPLATE = 1u << 3,
    TW_SAY_ECHO = 1u << 4,
    TW_SAY_SETTING = 1u << 5,
    TW_SAY_LOCK = 1u << 6,
    TW_SAY_FAULTS = 1u << 7,
    TW_SAY_STAGE_CUT = 1u << 8,
    TW_SAY_ENDS = 1u << 9,
    TW_SAY_TRACE = 1u << 10,
    TW_SAY_TELEMETRY = 1u << 11
};

/* tw_report.c: say all that is to be said. payload: what was heard, NULL for none; its TraceAsk
 * is used up. */
void tw_flush(tw_module *module, uint8_t *payload);
/* Write and remember an Answer of this boot; returns its length. */
uint8_t tw_answer(tw_module *module, uint32_t epoch, uint16_t number, uint8_t state,
                  uint8_t reason, uint16_t expect_ms);

/* tw_commands.c */
void tw_order(tw_module *module, const uint8_t *payload);
void tw_go(tw_module *module, const uint8_t *payload);
void tw_stage_look(tw_module *module);
/* Give up what is staged. */
void tw_unstage(tw_module *module, uint8_t reason);
/* The wheel speed that a motion or a spin orders, signed. */
int32_t tw_goal_rpm(const uint8_t *payload);

/* tw_drive.c */
int32_t tw_measure(const tw_module *module, tw_quantity what);
/* Angle turned since the start, positive in the ordered direction. */
int16_t tw_turned_ddeg(const tw_module *module);
/* Begin with a spin, a motion or a flash; returns how long it should take. */
uint32_t tw_begin(tw_module *module, const uint8_t *payload);
/* Rest the wheel where the motor drives it; what that cuts short is noted. */
void tw_rest_wheel(tw_module *module, uint8_t reason);
/* How long a rest should take from now on. */
uint32_t tw_rest_left_ms(const tw_module *module);
/* Rest the wheel where it is driven without a permit. */
void tw_look_at_permit(tw_module *module);
/* Go on with what is under way. */
void tw_step(tw_module *module);
void tw_carried_out(const tw_module *module, uint8_t code, uint16_t number);

/* tw_settings.c */
/* The present value of a setting that there is. */
int32_t tw_setting(const tw_module *module, uint8_t setting);
/* Value, lowest, highest; a setting that there is not has its highest below its lowest. */
void tw_setting_row(const tw_module *module, uint8_t setting, int32_t row[3]);
/* Store bytes of the record; where that fails a fault stands. Returns 1 where stored. */
uint8_t tw_keep(tw_module *module, uint8_t at, const uint8_t *bytes, uint8_t length);
uint8_t tw_is_locked(const tw_module *module);
uint8_t tw_flags(const tw_module *module);

#endif
