/*
 * heater: Keeps the instrument box of a survey raft warm with one switched heater.
 *
 * Made by hybgen 0.1.0 from heater.yaml, SHA-256
 *   53e63a38dd7f98275f1c10298238c100bc64629c5c0ce25a7745a68f2afcb7af
 * step 0.5 s, numbers float32, integration none
 * Compile as C99 (or C++) with -ffp-contract=off, without -ffast-math.
 *
 * Caution: this code can move machines. It was checked against its law in simulation, and simulation
 * is not a safety case. Local codes, functional-safety standards and a qualified review decide whether
 * it may be used.
 */
#ifndef HEATER_H
#define HEATER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#ifdef __cplusplus
extern "C" {
#endif

/* status bits of heater_step */
#define HEATER_STATUS_INVALID_INPUT 1u /* a sample was bad: not finite or out of range */
#define HEATER_STATUS_JUMP_LIMIT 2u /* one more jump is due; it is taken in the next step */
#define HEATER_STATUS_STUCK 4u /* neither flow nor jump is allowed: the state stays */
#define HEATER_STATUS_NON_FINITE 8u /* a computed value was not finite and was not taken */
#define HEATER_STATUS_PARAMETER 16u /* the parameters break a rule: the defaults were used */

/* jumps, as in last_jump; 0: none yet */
#define HEATER_JUMP_HEARD 1u
#define HEATER_JUMP_SENSOR_LOST 2u
#define HEATER_JUMP_OVERHEAT 3u
#define HEATER_JUMP_STOP 4u
#define HEATER_JUMP_START 5u
#define HEATER_JUMP_CLEARED 6u

/* values of mode */
typedef enum {
    HEATER_MODE_OFF = 0,
    HEATER_MODE_ON = 1,
    HEATER_MODE_FAULT = 2
} heater_mode;

/* the samples of one step */
typedef struct {
    float box; /* degC; -20 .. 80; temperature in the box */
    bool enabled; /* from the mission plan */
    bool clear; /* the operator clears a fault */
} heater_inputs;

/* what may be tuned at run time */
typedef struct {
    float target; /* degC; 5 .. 25 */
    float band; /* K; 1 .. 5; half of the gap between on and off */
} heater_parameters;

/* what a step gives */
typedef struct {
    bool heat;
    bool alarm;
    heater_mode state;
} heater_outputs;

/* one instance */
typedef struct {
    heater_mode mode;
    int32_t since; /* steps of 0.5 s, holds at 240 */
    int32_t silent; /* steps of 0.5 s, holds at 120 */
    float held_box; /* last good sample of box */
    uint32_t last_jump; /* number of the last jump */
    uint32_t jumps; /* count of jumps, wraps */
} heater;

/* the parameters as the law gives them */
extern const heater_parameters heater_defaults;

/* Puts an instance into the state after start. */
void heater_init(heater *self);

/* One step of 0.5 s; returns status bits. With broken parameters the step uses the defaults. */
uint32_t heater_step(heater *self, const heater_parameters *p, const heater_inputs *u, heater_outputs *y);

/*
 * 0, or 1 and more for the first broken rule:
 *   1: 5 <= target <= 25 degC
 *   2: 1 <= band <= 5 K
 */
uint32_t heater_check_parameters(const heater_parameters *p);

#ifndef HEATER_NO_NAMES
/* The name of a jump, "" for 0 and beyond. */
const char *heater_jump_name(uint32_t jump);
#endif

#ifdef __cplusplus
}
#endif

#endif
