/*
 * bilge_pump: Keeps the bilge of a survey raft between two marks with one pump.
 *
 * Made by hybgen 0.1.0 from bilge_pump.yaml, SHA-256
 *   1435530e261496836f5302dbedd0dd1d19e443fdacbbfb146b98f09e3ea75ab7
 * step 0.1 s, numbers float32, integration none
 * Compile as C99 (or C++) with -ffp-contract=off, without -ffast-math.
 *
 * Caution: this code can move machines. It was checked against its law in simulation, and simulation
 * is not a safety case. Local codes, functional-safety standards and a qualified review decide whether
 * it may be used.
 */
#ifndef BILGE_PUMP_H
#define BILGE_PUMP_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#ifdef __cplusplus
extern "C" {
#endif

/* status bits of bilge_pump_step */
#define BILGE_PUMP_STATUS_INVALID_INPUT 1u /* a sample was bad: not finite or out of range */
#define BILGE_PUMP_STATUS_JUMP_LIMIT 2u /* one more jump is due; it is taken in the next step */
#define BILGE_PUMP_STATUS_STUCK 4u /* neither flow nor jump is allowed: the state stays */
#define BILGE_PUMP_STATUS_NON_FINITE 8u /* a computed value was not finite and was not taken */
#define BILGE_PUMP_STATUS_PARAMETER 16u /* the parameters break a rule: the defaults were used */

/* jumps, as in last_jump; 0: none yet */
#define BILGE_PUMP_JUMP_LOST 1u
#define BILGE_PUMP_JUMP_START 2u
#define BILGE_PUMP_JUMP_STOP 3u

/* values of pump */
typedef enum {
    BILGE_PUMP_PUMP_OFF = 0,
    BILGE_PUMP_PUMP_ON = 1
} bilge_pump_pump;

/* the samples of one step */
typedef struct {
    float level; /* m; 0 .. 0.6 */
    bool armed;
} bilge_pump_inputs;

/* what may be tuned at run time */
typedef struct {
    float high; /* m; 0.25 .. 0.5 */
    float low; /* m; 0.05 .. 0.2 */
} bilge_pump_parameters;

/* what a step gives */
typedef struct {
    bool drive;
} bilge_pump_outputs;

/* one instance */
typedef struct {
    bilge_pump_pump pump;
    int32_t idle; /* steps of 0.1 s, holds at 600 */
    float held_level; /* last good sample of level */
    uint32_t last_jump; /* number of the last jump */
    uint32_t jumps; /* count of jumps, wraps */
} bilge_pump;

/* the parameters as the law gives them */
extern const bilge_pump_parameters bilge_pump_defaults;

/* Puts an instance into the state after start. */
void bilge_pump_init(bilge_pump *self);

/* One step of 0.1 s; returns status bits. With broken parameters the step uses the defaults. */
uint32_t bilge_pump_step(bilge_pump *self, const bilge_pump_parameters *p, const bilge_pump_inputs *u, bilge_pump_outputs *y);

/*
 * 0, or 1 and more for the first broken rule:
 *   1: 0.25 <= high <= 0.5 m
 *   2: 0.05 <= low <= 0.2 m
 */
uint32_t bilge_pump_check_parameters(const bilge_pump_parameters *p);

#ifndef BILGE_PUMP_NO_NAMES
/* The name of a jump, "" for 0 and beyond. */
const char *bilge_pump_jump_name(uint32_t jump);
#endif

#ifdef __cplusplus
}
#endif

#endif
