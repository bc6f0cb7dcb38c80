/*
 * charger: Charges the 12 V battery of a survey raft from its panel in three stages.
 *
 * Made by hybgen 0.1.0 from charger.yaml, SHA-256
 *   f987a5763a2d40657ff3f0087df233b7bcc6ac2fbdd51de6ce9a89dd68ade489
 * step 1 s, numbers float32, integration none
 * Compile as C99 (or C++) with -ffp-contract=off, without -ffast-math.
 *
 * Caution: this code can move machines. It was checked against its law in simulation, and simulation
 * is not a safety case. Local codes, functional-safety standards and a qualified review decide whether
 * it may be used.
 */
#ifndef CHARGER_H
#define CHARGER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#ifdef __cplusplus
extern "C" {
#endif

/* status bits of charger_step */
#define CHARGER_STATUS_INVALID_INPUT 1u /* a sample was bad: not finite or out of range */
#define CHARGER_STATUS_JUMP_LIMIT 2u /* one more jump is due; it is taken in the next step */
#define CHARGER_STATUS_STUCK 4u /* neither flow nor jump is allowed: the state stays */
#define CHARGER_STATUS_NON_FINITE 8u /* a computed value was not finite and was not taken */
#define CHARGER_STATUS_PARAMETER 16u /* the parameters break a rule: the defaults were used */

/* jumps, as in last_jump; 0: none yet */
#define CHARGER_JUMP_LOST 1u
#define CHARGER_JUMP_DARK 2u
#define CHARGER_JUMP_STUCK 3u
#define CHARGER_JUMP_BEGIN 4u
#define CHARGER_JUMP_REACHED 5u
#define CHARGER_JUMP_DONE 6u
#define CHARGER_JUMP_USED 7u
#define CHARGER_JUMP_CLEARED 8u

/* values of stage */
typedef enum {
    CHARGER_STAGE_WAITING = 0,
    CHARGER_STAGE_BULK = 1,
    CHARGER_STAGE_ABSORPTION = 2,
    CHARGER_STAGE_RESTING = 3,
    CHARGER_STAGE_FAULT = 4
} charger_stage;

/* the samples of one step */
typedef struct {
    float battery; /* V; 8 .. 18 */
    float current; /* A; -20 .. 20; into the battery */
    float warmth; /* degC; -30 .. 70; at the battery */
    bool sun; /* the panel can give power */
} charger_inputs;

/* what may be tuned at run time */
typedef struct {
    float full; /* V; 13.8 .. 14.8; absorption voltage at 25 degC */
    float rest; /* V; 13.2 .. 13.7; float voltage at 25 degC */
} charger_parameters;

/* what a step gives */
typedef struct {
    float voltage; /* V; 0 .. 16 */
    bool enable;
    bool alarm;
    charger_stage shown;
} charger_outputs;

/* one instance */
typedef struct {
    charger_stage stage;
    int32_t since; /* steps of 1 s, holds at 43200 */
    float held_battery; /* last good sample of battery */
    float held_current; /* last good sample of current */
    uint32_t last_jump; /* number of the last jump */
    uint32_t jumps; /* count of jumps, wraps */
} charger;

/* the parameters as the law gives them */
extern const charger_parameters charger_defaults;

/* Puts an instance into the state after start. */
void charger_init(charger *self);

/* One step of 1 s; returns status bits. With broken parameters the step uses the defaults. */
uint32_t charger_step(charger *self, const charger_parameters *p, const charger_inputs *u, charger_outputs *y);

/*
 * 0, or 1 and more for the first broken rule:
 *   1: 13.8 <= full <= 14.8 V
 *   2: 13.2 <= rest <= 13.7 V
 *   3: rest < full
 */
uint32_t charger_check_parameters(const charger_parameters *p);

#ifndef CHARGER_NO_NAMES
/* The name of a jump, "" for 0 and beyond. */
const char *charger_jump_name(uint32_t jump);
#endif

#ifdef __cplusplus
}
#endif

#endif
