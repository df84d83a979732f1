/* Whom a module follows, and until when its wheel may turn (WIRE.md, "Owner" and "Drive permit").
 *
 * Owns three things that belong together: which console is followed and whether another may take
 * the module over; what that console told of the module's clock; and the drive permit, which is
 * given in fleet time and ends in module time. All times are module time in milliseconds, modulo
 * 2^32. Zero the struct at each start. Knows no wheels and no commands.
 */
#ifndef TW_ALLEGIANCE_H
#define TW_ALLEGIANCE_H

#include <stdint.h>

#define TW_OWNER_GRACE_MS 3000u
#define TW_LONGEST_PERMIT_MS 60000u
#define TW_DRIFT_SHIFT 13u /* 122 parts in a million, as a shift */

typedef struct {
    uint32_t epoch;
    uint32_t console;    /* the one followed, 0 for none since the start */
    uint32_t adopted_ms; /* meaningful where adopted is 1 */
    uint32_t expiry_ms;  /* newest expiry heard, in fleet time, where permit is 1 */
    uint32_t offset_ms;  /* module time less fleet time, where told */
    uint32_t told_ms;
    uint16_t told; /* 0: no clock was told; else its bound in ms, and 1 */
    uint16_t slot_period_ms; /* 0: no telemetry slot */
    uint16_t slot_phase_ms;
    uint8_t adopted;
    uint8_t permit;
} tw_allegiance;

/* Hear a RollCall; follow its console where the rules allow. Returns 1 where the epoch was
 * adopted: the command memory is then to be emptied. */
uint8_t tw_hear_roll_call(tw_allegiance *allegiance, const uint8_t *payload, uint32_t now_ms);

/* Hear a Probe: take what the followed console makes of this clock, and nobody else's word. */
void tw_hear_probe(tw_allegiance *allegiance, const uint8_t *payload, uint32_t now_ms);

/* Hear a Permit: take one of the followed console that ends later than the one before. */
void tw_hear_permit(tw_allegiance *allegiance, const uint8_t *payload);

/* Hear a Release: where it is the followed console's, permit and ownership end. */
void tw_hear_release(tw_allegiance *allegiance, const uint8_t *payload);

/* Hear a Slot: take the followed console's telemetry slot. */
void tw_hear_slot(tw_allegiance *allegiance, const uint8_t *payload);

/* When telemetry is due that was last due at last_ms: by its slot, where there is one and a clock
 * to keep it by, else setting_ms later. */
uint32_t tw_report_due_ms(const tw_allegiance *allegiance, uint32_t last_ms, uint32_t setting_ms);

/* How long the wheel may still turn; 0 without a permit. */
uint32_t tw_permit_left_ms(const tw_allegiance *allegiance, uint32_t now_ms);

/* How long no other console can take the module over; 0: any can. */
uint32_t tw_owner_left_ms(const tw_allegiance *allegiance, uint32_t now_ms);

/* Call now and then, at least once a day: forgets what was told so long ago that the wrap of the
 * clock would make it look new. */
void tw_allegiance_age(tw_allegiance *allegiance, uint32_t now_ms);

#endif
