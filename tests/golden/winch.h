/*
 * winch: Holds the pay-out speed of the sonde's winch, by hand or automatic.
 *
 * Made by hybgen 0.1.0 from winch.yaml, SHA-256
 *   951417f22b15fea419018f93a636fa9130832daa7619ea97021e415e65d43372
 * step 0.02 s, numbers float32, integration euler
 * Compile as C99 (or C++) with -ffp-contract=off, without -ffast-math.
 *
 * Caution: this code can move machines. It was checked against its law in simulation, and simulation
 * is not a safety case. Local codes, functional-safety standards and a qualified review decide whether
 * it may be used.
 */
#ifndef WINCH_H
#define WINCH_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#ifdef __cplusplus
extern "C" {
#endif

/* status bits of winch_step */
#define WINCH_STATUS_INVALID_INPUT 1u /* a sample was bad: not finite or out of range */
#define WINCH_STATUS_JUMP_LIMIT 2u /* one more jump is due; it is taken in the next step */
#define WINCH_STATUS_STUCK 4u /* neither flow nor jump is allowed: the state stays */
#define WINCH_STATUS_NON_FINITE 8u /* a computed value was not finite and was not taken */
#define WINCH_STATUS_PARAMETER 16u /* the parameters break a rule: the defaults were used */

/* jumps, as in last_jump; 0: none yet */
#define WINCH_JUMP_TO_HAND 1u
#define WINCH_JUMP_TO_AUTOMATIC 2u

/* values of mode */
typedef enum {
    WINCH_MODE_MANUAL = 0,
    WINCH_MODE_AUTOMATIC = 1
} winch_mode;

/* the samples of one step */
typedef struct {
    float wanted; /* m/s; -1 .. 1; speed that the mission asks for */
    float speed; /* m/s; -1.5 .. 1.5; speed of the cable */
    float hand; /* V; -24 .. 24; the operator's lever */
    bool by_hand;
} winch_inputs;

/* what may be tuned at run time */
typedef struct {
    float gain; /* V*s/m; 5 .. 40 */
    float reset_time; /* s; 0.1 .. 2 */
} winch_parameters;

/* what a step gives */
typedef struct {
    float drive; /* V; -24 .. 24 */
    bool automatic_on;
} winch_outputs;

/* one instance */
typedef struct {
    winch_mode mode;
    float integral; /* V; -24 .. 24 */
    float held_speed; /* last good sample of speed */
    uint32_t last_jump; /* number of the last jump */
    uint32_t jumps; /* count of jumps, wraps */
} winch;

/* the parameters as the law gives them */
extern const winch_parameters winch_defaults;

/* Puts an instance into the state after start. */
void winch_init(winch *self);

/* One step of 0.02 s; returns status bits. With broken parameters the step uses the defaults. */
uint32_t winch_step(winch *self, const winch_parameters *p, const winch_inputs *u, winch_outputs *y);

/*
 * 0, or 1 and more for the first broken rule:
 *   1: 5 <= gain <= 40 V*s/m
 *   2: 0.1 <= reset_time <= 2 s
 */
uint32_t winch_check_parameters(const winch_parameters *p);

#ifndef WINCH_NO_NAMES
/* The name of a jump, "" for 0 and beyond. */
const char *winch_jump_name(uint32_t jump);
#endif

#ifdef __cplusplus
}
#endif

#endif
