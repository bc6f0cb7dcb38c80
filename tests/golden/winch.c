/*
 * Made by hybgen 0.1.0 from winch.yaml, SHA-256
 *   951417f22b15fea419018f93a636fa9130832daa7619ea97021e415e65d43372
 * step 0.02 s, numbers float32, integration euler
 * Compile as C99 (or C++) with -ffp-contract=off, without -ffast-math.
 *
 * Caution: this code can move machines. It was checked against its law in simulation, and simulation
 * is not a safety case. Local codes, functional-safety standards and a qualified review decide whether
 * it may be used.
 */
#include "winch.h"

/* Each operation has to be rounded once, as written: no fusing, no excess precision, no reordering. */
#if defined(__FAST_MATH__) || defined(__ASSOCIATIVE_MATH__) || defined(__RECIPROCAL_MATH__) || defined(__NO_SIGNED_ZEROS__)
#error "winch: compile without fast-math"
#endif
#if defined(__FINITE_MATH_ONLY__)
#if __FINITE_MATH_ONLY__ > 0
#error "winch: compile without finite-math-only"
#endif
#endif
#if defined(__FLT_EVAL_METHOD__)
#if (__FLT_EVAL_METHOD__ != 0)
#error "winch: the compiler evaluates in excess precision"
#endif
#endif
#if defined(__clang__)
#pragma STDC FP_CONTRACT OFF
#elif defined(__GNUC__)
#pragma GCC optimize("fp-contract=off")
#endif

/* what one step knows */
typedef struct {
    float wanted;
    float speed;
    float hand;
    bool by_hand;
    bool speed_valid; /* was the sample of speed good? */
} winch_now;

const winch_parameters winch_defaults = {
    18.0f, /* gain */
    0.4f /* reset_time */
};

static float winch_clamp(float x, float low, float high)
{
    return (x < low) ? low : ((x > high) ? high : x);
}

/* takes the snapshot: a bad sample becomes what the law says */
static uint32_t winch_read(winch *self, const winch_inputs *u, winch_now *now)
{
    uint32_t status = 0u;

    /* winch.yaml:10  wanted */
    if ((u->wanted >= (-1.0f)) && (u->wanted <= 1.0f)) {
        now->wanted = u->wanted;
    } else {
        now->wanted = 0.0f;
        status |= WINCH_STATUS_INVALID_INPUT;
    }
    /* winch.yaml:11  speed */
    now->speed_valid = (u->speed >= (-1.5f)) && (u->speed <= 1.5f);
    if (now->speed_valid) {
        now->speed = u->speed;
        self->held_speed = u->speed;
    } else {
        now->speed = self->held_speed;
        status |= WINCH_STATUS_INVALID_INPUT;
    }
    /* winch.yaml:12  hand */
    if ((u->hand >= (-24.0f)) && (u->hand <= 24.0f)) {
        now->hand = u->hand;
    } else {
        now->hand = 0.0f;
        status |= WINCH_STATUS_INVALID_INPUT;
    }
    /* winch.yaml:13  by_hand */
    now->by_hand = u->by_hand;
    return status;
}

/* the jump that is due, 0 if none */
static uint32_t winch_due(const winch *self, const winch_now *now)
{
    uint32_t answer = 0u;

    switch (self->mode) {
    case WINCH_MODE_MANUAL:
        if (!now->by_hand && now->speed_valid) {
            /* winch.yaml:44  mode == manual and not by_hand and valid(speed) */
            answer = WINCH_JUMP_TO_AUTOMATIC;
        }
        break;
    case WINCH_MODE_AUTOMATIC:
        if (now->by_hand || !now->speed_valid) {
            /* winch.yaml:40  mode == automatic and (by_hand or not valid(speed)) */
            answer = WINCH_JUMP_TO_HAND;
        }
        break;
    default:
        break;
    }
    return answer;
}

/* takes a jump: every new value from the old ones */
static void winch_take(winch *self, const winch_parameters *p, const winch_now *now, uint32_t jump)
{
    switch (jump) {
    case WINCH_JUMP_TO_HAND:
        /* winch.yaml:40  to_hand: mode == automatic and (by_hand or not valid(speed)) */
        /* winch.yaml:41  mode: manual */
        self->mode = WINCH_MODE_MANUAL;
        break;
    case WINCH_JUMP_TO_AUTOMATIC:
        {
            /* winch.yaml:26  error: wanted - speed */
            const float error = now->wanted - now->speed;
            /* winch.yaml:44  to_automatic: mode == manual and not by_hand and valid(speed) */
            /* winch.yaml:45  mode: automatic */
            self->mode = WINCH_MODE_AUTOMATIC;
            /* winch.yaml:45  integral: hand - gain * error */
            self->integral = winch_clamp(now->hand - (p->gain * error), (-24.0f), 24.0f);
        }
        break;
    default:
        break;
    }
    self->last_jump = jump;
    self->jumps = self->jumps + 1u;
}

/* the outputs */
static void winch_give(const winch *self, const winch_parameters *p, const winch_now *now, winch_outputs *y)
{
    if (self->mode == WINCH_MODE_AUTOMATIC) {
        /* winch.yaml:26  error: wanted - speed */
        const float error = now->wanted - now->speed;
        /* winch.yaml:27  asked: gain * error + integral */
        const float asked = (p->gain * error) + self->integral;
        /* winch.yaml:28  given: clamp(asked, -most, most) */
        const float given = winch_clamp(asked, (-24.0f), 24.0f);
        /* winch.yaml:54  drive: choose(mode == automatic, given, hand) */
        y->drive = winch_clamp(given, (-24.0f), 24.0f);
    } else {
        /* winch.yaml:54  drive: choose(mode == automatic, given, hand) */
        y->drive = winch_clamp(now->hand, (-24.0f), 24.0f);
    }
    /* winch.yaml:57  automatic_on: mode == automatic */
    y->automatic_on = self->mode == WINCH_MODE_AUTOMATIC;
}

/* flows for one step */
static void winch_advance(winch *self, const winch_parameters *p, const winch_now *now)
{
    if (self->mode == WINCH_MODE_AUTOMATIC) {
        /* winch.yaml:26  error: wanted - speed */
        const float error = now->wanted - now->speed;
        /* winch.yaml:27  asked: gain * error + integral */
        const float asked = (p->gain * error) + self->integral;
        /* winch.yaml:28  given: clamp(asked, -most, most) */
        const float given = winch_clamp(asked, (-24.0f), 24.0f);
        /* winch.yaml:34  integral: choose(mode == automatic, gain * error / reset_time + (given - asked) / tracking_time, 0) */
        self->integral = winch_clamp(self->integral
            + (0.02f * (((p->gain * error) / p->reset_time) + ((given - asked) / 0.2f))), (-24.0f), 24.0f);
    }
}

void winch_init(winch *self)
{
    self->mode = WINCH_MODE_MANUAL;
    self->integral = 0.0f;
    self->held_speed = 0.0f;
    self->last_jump = 0u;
    self->jumps = 0u;
}

uint32_t winch_check_parameters(const winch_parameters *p)
{
    uint32_t answer = 0u;

    if (!((p->gain >= 5.0f) && (p->gain <= 40.0f))) {
        /* winch.yaml:16  5 <= gain <= 40 V*s/m */
        answer = 1u;
    } else if (!((p->reset_time >= 0.1f) && (p->reset_time <= 2.0f))) {
        /* winch.yaml:17  0.1 <= reset_time <= 2 s */
        answer = 2u;
    }
    return answer;
}

uint32_t winch_step(winch *self, const winch_parameters *p, const winch_inputs *u, winch_outputs *y)
{
    const winch_parameters *used = p;
    winch_now now;
    uint32_t status = 0u;
    uint32_t jump;
    uint32_t taken;

    if (winch_check_parameters(p) != 0u) {
        used = &winch_defaults;
        status |= WINCH_STATUS_PARAMETER;
    }
    status |= winch_read(self, u, &now);
    jump = winch_due(self, &now);
    for (taken = 0u; (jump != 0u) && (taken < 2u); taken++) {
        winch_take(self, used, &now, jump);
        jump = winch_due(self, &now);
    }
    if (jump != 0u) {
        status |= WINCH_STATUS_JUMP_LIMIT;
    }
    winch_give(self, used, &now, y);
    winch_advance(self, used, &now);
    return status;
}

#ifndef WINCH_NO_NAMES
const char *winch_jump_name(uint32_t jump)
{
    const char *text = "";

    switch (jump) {
    case WINCH_JUMP_TO_HAND:
        text = "to_hand";
        break;
    case WINCH_JUMP_TO_AUTOMATIC:
        text = "to_automatic";
        break;
    default:
        break;
    }
    return text;
}
#endif
