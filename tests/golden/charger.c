/*
 * Made by hybgen 0.1.0 from charger.yaml, SHA-256
 *   f987a5763a2d40657ff3f0087df233b7bcc6ac2fbdd51de6ce9a89dd68ade489
 * step 1 s, numbers float32, integration none
 * Compile as C99 (or C++) with -ffp-contract=off, without -ffast-math.
 *
 * Caution: this code can move machines. It was checked against its law in simulation, and simulation
 * is not a safety case. Local codes, functional-safety standards and a qualified review decide whether
 * it may be used.
 */
#include "charger.h"

/* Each operation has to be rounded once, as written: no fusing, no excess precision, no reordering. */
#if defined(__FAST_MATH__) || defined(__ASSOCIATIVE_MATH__) || defined(__RECIPROCAL_MATH__) || defined(__NO_SIGNED_ZEROS__)
#error "charger: compile without fast-math"
#endif
#if defined(__FINITE_MATH_ONLY__)
#if __FINITE_MATH_ONLY__ > 0
#error "charger: compile without finite-math-only"
#endif
#endif
#if defined(__FLT_EVAL_METHOD__)
#if (__FLT_EVAL_METHOD__ != 0)
#error "charger: the compiler evaluates in excess precision"
#endif
#endif
#if defined(__clang__)
#pragma STDC FP_CONTRACT OFF
#elif defined(__GNUC__)
#pragma GCC optimize("fp-contract=off")
#endif

/* what one step knows */
typedef struct {
    float battery;
    float current;
    float warmth;
    bool sun;
    bool battery_valid; /* was the sample of battery good? */
} charger_now;

const charger_parameters charger_defaults = {
    14.4f, /* full */
    13.5f /* rest */
};

static float charger_clamp(float x, float low, float high)
{
    return (x < low) ? low : ((x > high) ? high : x);
}

/* takes the snapshot: a bad sample becomes what the law says */
static uint32_t charger_read(charger *self, const charger_inputs *u, charger_now *now)
{
    uint32_t status = 0u;

    /* charger.yaml:10  battery */
    now->battery_valid = (u->battery >= 8.0f) && (u->battery <= 18.0f);
    if (now->battery_valid) {
        now->battery = u->battery;
        self->held_battery = u->battery;
    } else {
        now->battery = self->held_battery;
        status |= CHARGER_STATUS_INVALID_INPUT;
    }
    /* charger.yaml:11  current */
    if ((u->current >= (-20.0f)) && (u->current <= 20.0f)) {
        now->current = u->current;
        self->held_current = u->current;
    } else {
        now->current = self->held_current;
        status |= CHARGER_STATUS_INVALID_INPUT;
    }
    /* charger.yaml:12  warmth */
    if ((u->warmth >= (-30.0f)) && (u->warmth <= 70.0f)) {
        now->warmth = u->warmth;
    } else {
        now->warmth = 25.0f;
        status |= CHARGER_STATUS_INVALID_INPUT;
    }
    /* charger.yaml:13  sun */
    now->sun = u->sun;
    return status;
}

/* the jump that is due, 0 if none */
static uint32_t charger_due(const charger *self, const charger_parameters *p, const charger_now *now)
{
    uint32_t answer = 0u;

    switch (self->stage) {
    case CHARGER_STAGE_WAITING:
        if (!now->battery_valid) {
            /* charger.yaml:36  stage != fault and not valid(battery) */
            answer = CHARGER_JUMP_LOST;
        } else if (now->sun && now->battery_valid) {
            /* charger.yaml:45  stage == waiting and sun and valid(battery) */
            answer = CHARGER_JUMP_BEGIN;
        }
        break;
    case CHARGER_STAGE_BULK:
        if (!now->battery_valid) {
            /* charger.yaml:36  stage != fault and not valid(battery) */
            answer = CHARGER_JUMP_LOST;
        } else if (!now->sun) {
            /* charger.yaml:39  not sun and (stage == bulk or stage == absorption or stage == resting) */
            answer = CHARGER_JUMP_DARK;
        } else if (self->since >= 36000) {
            /* charger.yaml:42  stage == bulk and since >= longest_bulk */
            answer = CHARGER_JUMP_STUCK;
        } else {
            /* charger.yaml:30  shift: slope * (warmth - 25 degC) */
            const float shift = (-0.024f) * (now->warmth - 25.0f);
            /* charger.yaml:31  goal: full + shift */
            const float goal = p->full + shift;
            if ((now->battery - goal) >= 1.0705294e-06f) {
                /* charger.yaml:48  stage == bulk and battery >= goal; rounding at most 1.1e-06, jumps at the latest 2.2e-06 beyond */
                answer = CHARGER_JUMP_REACHED;
            }
        }
        break;
    case CHARGER_STAGE_ABSORPTION:
        if (!now->battery_valid) {
            /* charger.yaml:36  stage != fault and not valid(battery) */
            answer = CHARGER_JUMP_LOST;
        } else if (!now->sun) {
            /* charger.yaml:39  not sun and (stage == bulk or stage == absorption or stage == resting) */
            answer = CHARGER_JUMP_DARK;
        } else if ((self->since >= 14400) || ((self->since >= 60) && (now->current <= 1.0f))) {
            /* charger.yaml:51  stage == absorption and (since >= longest_absorption or (since >= settle and current <= tail)) */
            answer = CHARGER_JUMP_DONE;
        }
        break;
    case CHARGER_STAGE_RESTING:
        if (!now->battery_valid) {
            /* charger.yaml:36  stage != fault and not valid(battery) */
            answer = CHARGER_JUMP_LOST;
        } else if (!now->sun) {
            /* charger.yaml:39  not sun and (stage == bulk or stage == absorption or stage == resting) */
            answer = CHARGER_JUMP_DARK;
        } else if ((self->since >= 60) && (now->battery <= 12.599999f)) {
            /* charger.yaml:54  stage == resting and since >= settle and battery <= again */
            answer = CHARGER_JUMP_USED;
        }
        break;
    case CHARGER_STAGE_FAULT:
        if (!now->sun && now->battery_valid) {
            /* charger.yaml:57  stage == fault and not sun and valid(battery) */
            answer = CHARGER_JUMP_CLEARED;
        }
        break;
    default:
        break;
    }
    return answer;
}

/* takes a jump: every new value from the old ones */
static void charger_take(charger *self, uint32_t jump)
{
    switch (jump) {
    case CHARGER_JUMP_LOST:
        /* charger.yaml:36  lost: stage != fault and not valid(battery) */
        /* charger.yaml:37  stage: fault */
        self->stage = CHARGER_STAGE_FAULT;
        /* charger.yaml:37  since: 0 s */
        self->since = 0;
        break;
    case CHARGER_JUMP_DARK:
        /* charger.yaml:39  dark: not sun and (stage == bulk or stage == absorption or stage == resting) */
        /* charger.yaml:40  stage: waiting */
        self->stage = CHARGER_STAGE_WAITING;
        /* charger.yaml:40  since: 0 s */
        self->since = 0;
        break;
    case CHARGER_JUMP_STUCK:
        /* charger.yaml:42  stuck: stage == bulk and since >= longest_bulk */
        /* charger.yaml:43  stage: fault */
        self->stage = CHARGER_STAGE_FAULT;
        /* charger.yaml:43  since: 0 s */
        self->since = 0;
        break;
    case CHARGER_JUMP_BEGIN:
        /* charger.yaml:45  begin: stage == waiting and sun and valid(battery) */
        /* charger.yaml:46  stage: bulk */
        self->stage = CHARGER_STAGE_BULK;
        /* charger.yaml:46  since: 0 s */
        self->since = 0;
        break;
    case CHARGER_JUMP_REACHED:
        /* charger.yaml:48  reached: stage == bulk and battery >= goal */
        /* charger.yaml:49  stage: absorption */
        self->stage = CHARGER_STAGE_ABSORPTION;
        /* charger.yaml:49  since: 0 s */
        self->since = 0;
        break;
    case CHARGER_JUMP_DONE:
        /* charger.yaml:51  done: stage == absorption and (since >= longest_absorption or (since >= settle and current <= tail)) */
        /* charger.yaml:52  stage: resting */
        self->stage = CHARGER_STAGE_RESTING;
        /* charger.yaml:52  since: 0 s */
        self->since = 0;
        break;
    case CHARGER_JUMP_USED:
        /* charger.yaml:54  used: stage == resting and since >= settle and battery <= again */
        /* charger.yaml:55  stage: bulk */
        self->stage = CHARGER_STAGE_BULK;
        /* charger.yaml:55  since: 0 s */
        self->since = 0;
        break;
    case CHARGER_JUMP_CLEARED:
        /* charger.yaml:57  cleared: stage == fault and not sun and valid(battery) */
        /* charger.yaml:58  stage: waiting */
        self->stage = CHARGER_STAGE_WAITING;
        /* charger.yaml:58  since: 0 s */
        self->since = 0;
        break;
    default:
        break;
    }
    self->last_jump = jump;
    self->jumps = self->jumps + 1u;
}

/* the outputs */
static void charger_give(const charger *self, const charger_parameters *p, const charger_now *now, charger_outputs *y)
{
    /* charger.yaml:30  shift: slope * (warmth - 25 degC) */
    const float shift = (-0.024f) * (now->warmth - 25.0f);
    if ((self->stage == CHARGER_STAGE_BULK) || (self->stage == CHARGER_STAGE_ABSORPTION)) {
        /* charger.yaml:31  goal: full + shift */
        const float goal = p->full + shift;
        /* charger.yaml:67  voltage: choose(stage == bulk or stage == absorption, goal, choose(stage == resting, hold, 0)) */
        y->voltage = charger_clamp(goal, 0.0f, 16.0f);
    } else if (self->stage == CHARGER_STAGE_RESTING) {
        /* charger.yaml:32  hold: rest + shift */
        const float hold = p->rest + shift;
        /* charger.yaml:67  voltage: choose(stage == bulk or stage == absorption, goal, choose(stage == resting, hold, 0)) */
        y->voltage = charger_clamp(hold, 0.0f, 16.0f);
    } else {
        /* charger.yaml:67  voltage: choose(stage == bulk or stage == absorption, goal, choose(stage == resting, hold, 0)) */
        y->voltage = 0.0f;
    }
    /* charger.yaml:72  enable: stage == bulk or stage == absorption or stage == resting */
    y->enable = (self->stage == CHARGER_STAGE_BULK) || (self->stage == CHARGER_STAGE_ABSORPTION)
        || (self->stage == CHARGER_STAGE_RESTING);
    /* charger.yaml:73  alarm: stage == fault */
    y->alarm = self->stage == CHARGER_STAGE_FAULT;
    /* charger.yaml:74  shown: stage */
    y->shown = self->stage;
}

/* flows for one step */
static void charger_advance(charger *self)
{
    if (self->since < 43200) {
        /* charger.yaml:27  since counts steps */
        self->since = self->since + 1;
    }
}

void charger_init(charger *self)
{
    self->stage = CHARGER_STAGE_WAITING;
    self->since = 0;
    self->held_battery = 13.0f;
    self->held_current = 0.0f;
    self->last_jump = 0u;
    self->jumps = 0u;
}

uint32_t charger_check_parameters(const charger_parameters *p)
{
    uint32_t answer = 0u;

    if (!((p->full >= 13.8f) && (p->full <= 14.8f))) {
        /* charger.yaml:16  13.8 <= full <= 14.8 V */
        answer = 1u;
    } else if (!((p->rest >= 13.2f) && (p->rest <= 13.7f))) {
        /* charger.yaml:17  13.2 <= rest <= 13.7 V */
        answer = 2u;
    } else if (!(p->rest < p->full)) {
        /* charger.yaml:77  rest < full */
        answer = 3u;
    }
    return answer;
}

uint32_t charger_step(charger *self, const charger_parameters *p, const charger_inputs *u, charger_outputs *y)
{
    const charger_parameters *used = p;
    charger_now now;
    uint32_t status = 0u;
    uint32_t jump;
    uint32_t taken;

    if (charger_check_parameters(p) != 0u) {
        used = &charger_defaults;
        status |= CHARGER_STATUS_PARAMETER;
    }
    status |= charger_read(self, u, &now);
    jump = charger_due(self, used, &now);
    for (taken = 0u; (jump != 0u) && (taken < 4u); taken++) {
        charger_take(self, jump);
        jump = charger_due(self, used, &now);
    }
    if (jump != 0u) {
        status |= CHARGER_STATUS_JUMP_LIMIT;
    }
    charger_give(self, used, &now, y);
    charger_advance(self);
    return status;
}

#ifndef CHARGER_NO_NAMES
const char *charger_jump_name(uint32_t jump)
{
    const char *text = "";

    switch (jump) {
    case CHARGER_JUMP_LOST:
        text = "lost";
        break;
    case CHARGER_JUMP_DARK:
        text = "dark";
        break;
    case CHARGER_JUMP_STUCK:
        text = "stuck";
        break;
    case CHARGER_JUMP_BEGIN:
        text = "begin";
        break;
    case CHARGER_JUMP_REACHED:
        text = "reached";
        break;
    case CHARGER_JUMP_DONE:
        text = "done";
        break;
    case CHARGER_JUMP_USED:
        text = "used";
        break;
    case CHARGER_JUMP_CLEARED:
        text = "cleared";
        break;
    default:
        break;
    }
    return text;
}
#endif
