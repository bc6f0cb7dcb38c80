/*
 * Made by hybgen 0.1.0 from heater.yaml, SHA-256
 *   53e63a38dd7f98275f1c10298238c100bc64629c5c0ce25a7745a68f2afcb7af
 * step 0.5 s, numbers float32, integration none
 * Compile as C99 (or C++) with -ffp-contract=off, without -ffast-math.
 *
 * Caution: this code can move machines. It was checked against its law in simulation, and simulation
 * is not a safety case. Local codes, functional-safety standards and a qualified review decide whether
 * it may be used.
 */
#include "heater.h"

/* Each operation has to be rounded once, as written: no fusing, no excess precision, no reordering. */
#if defined(__FAST_MATH__) || defined(__ASSOCIATIVE_MATH__) || defined(__RECIPROCAL_MATH__) || defined(__NO_SIGNED_ZEROS__)
#error "heater: compile without fast-math"
#endif
#if defined(__FINITE_MATH_ONLY__)
#if __FINITE_MATH_ONLY__ > 0
#error "heater: compile without finite-math-only"
#endif
#endif
#if defined(__FLT_EVAL_METHOD__)
#if (__FLT_EVAL_METHOD__ != 0)
#error "heater: the compiler evaluates in excess precision"
#endif
#endif
#if defined(__clang__)
#pragma STDC FP_CONTRACT OFF
#elif defined(__GNUC__)
#pragma GCC optimize("fp-contract=off")
#endif

/* what one step knows */
typedef struct {
    float box;
    bool enabled;
    bool clear;
    bool box_valid; /* was the sample of box good? */
} heater_now;

const heater_parameters heater_defaults = {
    15.0f, /* target */
    2.0f /* band */
};

/* takes the snapshot: a bad sample becomes what the law says */
static uint32_t heater_read(heater *self, const heater_inputs *u, heater_now *now)
{
    uint32_t status = 0u;

    /* heater.yaml:9  box */
    now->box_valid = (u->box >= (-20.0f)) && (u->box <= 80.0f);
    if (now->box_valid) {
        now->box = u->box;
        self->held_box = u->box;
    } else {
        now->box = self->held_box;
        status |= HEATER_STATUS_INVALID_INPUT;
    }
    /* heater.yaml:10  enabled */
    now->enabled = u->enabled;
    /* heater.yaml:11  clear */
    now->clear = u->clear;
    return status;
}

/* the jump that is due, 0 if none */
static uint32_t heater_due(const heater *self, const heater_parameters *p, const heater_now *now)
{
    uint32_t answer = 0u;

    switch (self->mode) {
    case HEATER_MODE_OFF:
        if (now->box_valid && (self->silent > 0)) {
            /* heater.yaml:28  valid(box) and silent > 0 s */
            answer = HEATER_JUMP_HEARD;
        } else if (self->silent >= 20) {
            /* heater.yaml:31  mode != fault and silent >= patience */
            answer = HEATER_JUMP_SENSOR_LOST;
        } else if (now->enabled && (self->since >= 120)
            && ((now->box - (p->target - p->band)) <= (-9.536745e-07f))) {
            /* heater.yaml:43  mode == off and enabled and since >= least_off and box <= target - band; rounding at most 9.6e-07, jumps at the latest 2e-06 beyond */
            answer = HEATER_JUMP_START;
        }
        break;
    case HEATER_MODE_ON:
        if (now->box_valid && (self->silent > 0)) {
            /* heater.yaml:28  valid(box) and silent > 0 s */
            answer = HEATER_JUMP_HEARD;
        } else if (self->silent >= 20) {
            /* heater.yaml:31  mode != fault and silent >= patience */
            answer = HEATER_JUMP_SENSOR_LOST;
        } else if (now->box >= 60.0f) {
            /* heater.yaml:35  mode == on and box >= too_hot */
            answer = HEATER_JUMP_OVERHEAT;
        } else if ((self->since >= 60)
            && (((now->box - (p->target + p->band)) >= 9.536745e-07f) || !now->enabled)) {
            /* heater.yaml:39  mode == on and since >= least_on and (box >= target + band or not enabled); rounding at most 9.6e-07, jumps at the latest 2e-06 beyond */
            answer = HEATER_JUMP_STOP;
        }
        break;
    case HEATER_MODE_FAULT:
        if (now->box_valid && (self->silent > 0)) {
            /* heater.yaml:28  valid(box) and silent > 0 s */
            answer = HEATER_JUMP_HEARD;
        } else if (now->clear && now->box_valid && (now->box < 60.0f)) {
            /* heater.yaml:47  mode == fault and clear and valid(box) and box < too_hot */
            answer = HEATER_JUMP_CLEARED;
        }
        break;
    default:
        break;
    }
    return answer;
}

/* takes a jump: every new value from the old ones */
static void heater_take(heater *self, uint32_t jump)
{
    switch (jump) {
    case HEATER_JUMP_HEARD:
        /* heater.yaml:28  heard: valid(box) and silent > 0 s */
        /* heater.yaml:29  silent: 0 s */
        self->silent = 0;
        break;
    case HEATER_JUMP_SENSOR_LOST:
        /* heater.yaml:31  sensor_lost: mode != fault and silent >= patience */
        /* heater.yaml:32  mode: fault */
        self->mode = HEATER_MODE_FAULT;
        /* heater.yaml:32  since: 0 s */
        self->since = 0;
        break;
    case HEATER_JUMP_OVERHEAT:
        /* heater.yaml:35  overheat: mode == on and box >= too_hot */
        /* heater.yaml:36  mode: fault */
        self->mode = HEATER_MODE_FAULT;
        /* heater.yaml:36  since: 0 s */
        self->since = 0;
        break;
    case HEATER_JUMP_STOP:
        /* heater.yaml:39  stop: mode == on and since >= least_on and (box >= target + band or not enabled) */
        /* heater.yaml:40  mode: off */
        self->mode = HEATER_MODE_OFF;
        /* heater.yaml:40  since: 0 s */
        self->since = 0;
        break;
    case HEATER_JUMP_START:
        /* heater.yaml:43  start: mode == off and enabled and since >= least_off and box <= target - band */
        /* heater.yaml:44  mode: on */
        self->mode = HEATER_MODE_ON;
        /* heater.yaml:44  since: 0 s */
        self->since = 0;
        break;
    case HEATER_JUMP_CLEARED:
        /* heater.yaml:47  cleared: mode == fault and clear and valid(box) and box < too_hot */
        /* heater.yaml:48  mode: off */
        self->mode = HEATER_MODE_OFF;
        /* heater.yaml:48  since: 0 s */
        self->since = 0;
        break;
    default:
        break;
    }
    self->last_jump = jump;
    self->jumps = self->jumps + 1u;
}

/* the outputs */
static void heater_give(const heater *self, heater_outputs *y)
{
    /* heater.yaml:52  heat: mode == on */
    y->heat = self->mode == HEATER_MODE_ON;
    /* heater.yaml:53  alarm: mode == fault */
    y->alarm = self->mode == HEATER_MODE_FAULT;
    /* heater.yaml:54  state: mode */
    y->state = self->mode;
}

/* flows for one step */
static void heater_advance(heater *self)
{
    if (self->since < 240) {
        /* heater.yaml:23  since counts steps */
        self->since = self->since + 1;
    }
    if (self->silent < 120) {
        /* heater.yaml:24  silent counts steps */
        self->silent = self->silent + 1;
    }
}

void heater_init(heater *self)
{
    self->mode = HEATER_MODE_OFF;
    self->since = 120;
    self->silent = 0;
    self->held_box = 30.0f;
    self->last_jump = 0u;
    self->jumps = 0u;
}

uint32_t heater_check_parameters(const heater_parameters *p)
{
    uint32_t answer = 0u;

    if (!((p->target >= 5.0f) && (p->target <= 25.0f))) {
        /* heater.yaml:14  5 <= target <= 25 degC */
        answer = 1u;
    } else if (!((p->band >= 1.0f) && (p->band <= 5.0f))) {
        /* heater.yaml:15  1 <= band <= 5 K */
        answer = 2u;
    }
    return answer;
}

uint32_t heater_step(heater *self, const heater_parameters *p, const heater_inputs *u, heater_outputs *y)
{
    const heater_parameters *used = p;
    heater_now now;
    uint32_t status = 0u;
    uint32_t jump;
    uint32_t taken;

    if (heater_check_parameters(p) != 0u) {
        used = &heater_defaults;
        status |= HEATER_STATUS_PARAMETER;
    }
    status |= heater_read(self, u, &now);
    jump = heater_due(self, used, &now);
    for (taken = 0u; (jump != 0u) && (taken < 6u); taken++) {
        heater_take(self, jump);
        jump = heater_due(self, used, &now);
    }
    if (jump != 0u) {
        status |= HEATER_STATUS_JUMP_LIMIT;
    }
    heater_give(self, y);
    heater_advance(self);
    return status;
}

#ifndef HEATER_NO_NAMES
const char *heater_jump_name(uint32_t jump)
{
    const char *text = "";

    switch (jump) {
    case HEATER_JUMP_HEARD:
        text = "heard";
        break;
    case HEATER_JUMP_SENSOR_LOST:
        text = "sensor_lost";
        break;
    case HEATER_JUMP_OVERHEAT:
        text = "overheat";
        break;
    case HEATER_JUMP_STOP:
        text = "stop";
        break;
    case HEATER_JUMP_START:
        text = "start";
        break;
    case HEATER_JUMP_CLEARED:
        text = "cleared";
        break;
    default:
        break;
    }
    return text;
}
#endif
