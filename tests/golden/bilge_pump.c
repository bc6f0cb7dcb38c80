/*
 * Made by hybgen 0.1.0 from bilge_pump.yaml, SHA-256
 *   1435530e261496836f5302dbedd0dd1d19e443fdacbbfb146b98f09e3ea75ab7
 * step 0.1 s, numbers float32, integration none
 * Compile as C99 (or C++) with -ffp-contract=off, without -ffast-math.
 *
 * Caution: this code can move machines. It was checked against its law in simulation, and simulation
 * is not a safety case. Local codes, functional-safety standards and a qualified review decide whether
 * it may be used.
 */
#include "bilge_pump.h"

/* Each operation has to be rounded once, as written: no fusing, no excess precision, no reordering. */
#if defined(__FAST_MATH__) || defined(__ASSOCIATIVE_MATH__) || defined(__RECIPROCAL_MATH__) || defined(__NO_SIGNED_ZEROS__)
#error "bilge_pump: compile without fast-math"
#endif
#if defined(__FINITE_MATH_ONLY__)
#if __FINITE_MATH_ONLY__ > 0
#error "bilge_pump: compile without finite-math-only"
#endif
#endif
#if defined(__FLT_EVAL_METHOD__)
#if (__FLT_EVAL_METHOD__ != 0)
#error "bilge_pump: the compiler evaluates in excess precision"
#endif
#endif
#if defined(__clang__)
#pragma STDC FP_CONTRACT OFF
#elif defined(__GNUC__)
#pragma GCC optimize("fp-contract=off")
#endif

/* what one step knows */
typedef struct {
    float level;
    bool armed;
    bool level_valid; /* was the sample of level good? */
} bilge_pump_now;

const bilge_pump_parameters bilge_pump_defaults = {
    0.3f, /* high */
    0.1f /* low */
};

/* takes the snapshot: a bad sample becomes what the law says */
static uint32_t bilge_pump_read(bilge_pump *self, const bilge_pump_inputs *u, bilge_pump_now *now)
{
    uint32_t status = 0u;

    /* bilge_pump.yaml:10  level */
    now->level_valid = (u->level >= 0.0f) && (u->level <= 0.6f);
    if (now->level_valid) {
        now->level = u->level;
        self->held_level = u->level;
    } else {
        now->level = self->held_level;
        status |= BILGE_PUMP_STATUS_INVALID_INPUT;
    }
    /* bilge_pump.yaml:11  armed */
    now->armed = u->armed;
    return status;
}

/* the jump that is due, 0 if none */
static uint32_t bilge_pump_due(const bilge_pump *self, const bilge_pump_parameters *p, const bilge_pump_now *now)
{
    uint32_t answer = 0u;

    switch (self->pump) {
    case BILGE_PUMP_PUMP_OFF:
        if (now->armed && (now->level >= p->high) && (self->idle >= 200)) {
            /* bilge_pump.yaml:28  armed and pump == off and level >= high and idle >= rest */
            answer = BILGE_PUMP_JUMP_START;
        }
        break;
    case BILGE_PUMP_PUMP_ON:
        if (!now->level_valid) {
            /* bilge_pump.yaml:24  not valid(level) and pump == on */
            answer = BILGE_PUMP_JUMP_LOST;
        } else if ((now->level <= p->low) || !now->armed) {
            /* bilge_pump.yaml:32  pump == on and (level <= low or not armed) */
            answer = BILGE_PUMP_JUMP_STOP;
        }
        break;
    default:
        break;
    }
    return answer;
}

/* takes a jump: every new value from the old ones */
static void bilge_pump_take(bilge_pump *self, uint32_t jump)
{
    switch (jump) {
    case BILGE_PUMP_JUMP_LOST:
        /* bilge_pump.yaml:24  lost: not valid(level) and pump == on */
        /* bilge_pump.yaml:25  pump: off */
        self->pump = BILGE_PUMP_PUMP_OFF;
        /* bilge_pump.yaml:25  idle: 0 s */
        self->idle = 0;
        break;
    case BILGE_PUMP_JUMP_START:
        /* bilge_pump.yaml:28  start: armed and pump == off and level >= high and idle >= rest */
        /* bilge_pump.yaml:29  pump: on */
        self->pump = BILGE_PUMP_PUMP_ON;
        break;
    case BILGE_PUMP_JUMP_STOP:
        /* bilge_pump.yaml:32  stop: pump == on and (level <= low or not armed) */
        /* bilge_pump.yaml:33  pump: off */
        self->pump = BILGE_PUMP_PUMP_OFF;
        /* bilge_pump.yaml:33  idle: 0 s */
        self->idle = 0;
        break;
    default:
        break;
    }
    self->last_jump = jump;
    self->jumps = self->jumps + 1u;
}

/* the outputs */
static void bilge_pump_give(const bilge_pump *self, bilge_pump_outputs *y)
{
    /* bilge_pump.yaml:36  drive: pump == on */
    y->drive = self->pump == BILGE_PUMP_PUMP_ON;
}

/* flows for one step */
static void bilge_pump_advance(bilge_pump *self)
{
    if (self->idle < 600) {
        /* bilge_pump.yaml:20  idle counts steps */
        self->idle = self->idle + 1;
    }
}

void bilge_pump_init(bilge_pump *self)
{
    self->pump = BILGE_PUMP_PUMP_OFF;
    self->idle = 600;
    self->held_level = 0.3f;
    self->last_jump = 0u;
    self->jumps = 0u;
}

uint32_t bilge_pump_check_parameters(const bilge_pump_parameters *p)
{
    uint32_t answer = 0u;

    if (!((p->high >= 0.25f) && (p->high <= 0.5f))) {
        /* bilge_pump.yaml:14  0.25 <= high <= 0.5 m */
        answer = 1u;
    } else if (!((p->low >= 0.05f) && (p->low <= 0.2f))) {
        /* bilge_pump.yaml:15  0.05 <= low <= 0.2 m */
        answer = 2u;
    }
    return answer;
}

uint32_t bilge_pump_step(bilge_pump *self, const bilge_pump_parameters *p, const bilge_pump_inputs *u, bilge_pump_outputs *y)
{
    const bilge_pump_parameters *used = p;
    bilge_pump_now now;
    uint32_t status = 0u;
    uint32_t jump;
    uint32_t taken;

    if (bilge_pump_check_parameters(p) != 0u) {
        used = &bilge_pump_defaults;
        status |= BILGE_PUMP_STATUS_PARAMETER;
    }
    status |= bilge_pump_read(self, u, &now);
    jump = bilge_pump_due(self, used, &now);
    for (taken = 0u; (jump != 0u) && (taken < 2u); taken++) {
        bilge_pump_take(self, jump);
        jump = bilge_pump_due(self, used, &now);
    }
    if (jump != 0u) {
        status |= BILGE_PUMP_STATUS_JUMP_LIMIT;
    }
    bilge_pump_give(self, y);
    bilge_pump_advance(self);
    return status;
}

#ifndef BILGE_PUMP_NO_NAMES
const char *bilge_pump_jump_name(uint32_t jump)
{
    const char *text = "";

    switch (jump) {
    case BILGE_PUMP_JUMP_LOST:
        text = "lost";
        break;
    case BILGE_PUMP_JUMP_START:
        text = "start";
        break;
    case BILGE_PUMP_JUMP_STOP:
        text = "stop";
        break;
    default:
        break;
    }
    return text;
}
#endif
