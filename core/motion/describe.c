/* The derived equations and their split as text. */
#include "core/motion/model_inside.h"

#include <stdarg.h>
#include <stdio.h>
#include <string.h>

#include "core/base/memory.h"

typedef struct text {
    size_t n, room;
    char *buf;
    bool failed;
} text;

static char *more_room(text *t, size_t extra) {
    if (t->failed) return NULL;
    if (t->n + extra + 1 > t->room) {
        size_t room = 2 * (t->n + extra + 256);
        char *buf = mt_resize(t->buf, room, 1);
        t->failed = !buf;
        if (!buf) return NULL;
        t->buf = buf;
        t->room = room;
    }
    return t->buf + t->n;
}

static void say(text *t, const char *format, ...) MT_PRINTF(2, 3);
static void say(text *t, const char *format, ...) {
    va_list args, again;
    va_start(args, format);
    va_copy(again, args);
    int n = vsnprintf(NULL, 0, format, args);
    char *at = more_room(t, (size_t)n);
    if (at) vsnprintf(at, (size_t)n + 1, format, again), t->n += (size_t)n;
    va_end(again);
    va_end(args);
}

static void say_expr(text *t, const mt_expr *e) {
    size_t n = mt_expr_print(e, NULL, 0);
    char *at = more_room(t, n);
    if (at) mt_expr_print(e, at, n + 1), t->n += n;
}

static const char *motion_text(mt_motion motion) {
    static const char *texts[] = {"does not move", "conserved", "relaxing", "own right-hand side"};
    return texts[motion];
}

/* d c/dt = div( M grad( dF/dc ) ) + div( M12 grad( dF/de ) ) ... with what the letters stand for. */
static void say_equation(text *t, const mt_model *m, const mt_mover *v) {
    const char *name = v->field->symbol->name;
    bool flux = v->motion == MT_MOTION_CONSERVE;
    say(t, "    equation   d%s/dt = ", name);
    if (v->motion == MT_MOTION_EVOLVE)
        say_expr(t, v->given);
    else
        say(t, flux ? "div( M grad( dF/d%s ) )" : "-L dF/d%s", name);
    for (int j = 0; j < v->couplings; j++)
        say(t, flux ? " + div( M%d grad( dF/d%s ) )" : " - L%d dF/d%s", j + 2,
            m->mover[v->coupling[j].other].field->symbol->name);
    if (v->velocity[0]) say(t, " - div( v %s )", name);
    if (v->source) say(t, " + source");
    if (v->keeps_mean) say(t, " + what keeps the mean");
    if (v->noises) say(t, flux ? " + div( thermal noise )" : " + thermal noise");
    if (v->motion != MT_MOTION_EVOLVE) {
        say(t, flux ? ", M = " : ", L = ");
        say_expr(t, v->given);
    }
    for (int j = 0; j < v->couplings; j++) {
        say(t, flux ? ", M%d = " : ", L%d = ", j + 2);
        say_expr(t, v->coupling[j].given);
    }
    for (int a = 0; a < m->grid->dim && v->velocity[0]; a++) {
        say(t, a ? ", " : ", v = (");
        say_expr(t, v->velocity[a]);
    }
    if (v->velocity[0]) say(t, ")");
    if (v->source) {
        say(t, ", source = ");
        say_expr(t, v->source);
    }
    say(t, "\n");
}

static void say_mover(text *t, const mt_model *m, const mt_mover *v) {
    const char *name = v->field->symbol->name;
    say(t, "  field %s (%s)\n", name, motion_text(v->motion));
    if (v->motion == MT_MOTION_STILL) return;
    if (v->potential) {
        say(t, "    potential  dF/d%s = ", name);
        say_expr(t, v->potential);
        say(t, "\n");
    }
    say_equation(t, m, v);
    for (int j = 0; j < v->noises; j++) {
        say(t, "    thermal noise of amplitude (per root of time) ");
        say_expr(t, v->noise[j].amplitude);
        say(t, "\n");
    }
    say(t, "    linear part, exact in k     ");
    say_expr(t, v->linear);
    say(t, "\n    taken implicitly            ");
    say_expr(t, v->implicit);
    if (v->dominates)
        say(t, "\n      stabilisation = theta times the largest value over the cells of the coefficient");
    if (v->partner >= 0) {
        say(t, "\n    solved together with %s, whose part is ", m->mover[v->partner].field->symbol->name);
        say_expr(t, v->cross);
    }
    say(t, "\n");
}

static void say_stages(text *t, const mt_program *p) {
    int transforms = 0;
    for (int s = 0; s < p->stages; s++) {
        const mt_stage *g = &p->stage[s];
        say(t, "  stage %d: real space, from", s + 1);
        for (int i = 0; i < g->nin; i++) {
            say(t, i ? ", " : " ");
            say_expr(t, p->split.quantity[g->in[i]].node);
        }
        say(t, "\n");
        for (int i = 0; i < g->nout; i++) {
            say(t, "    N%d = ", g->out[i] + 1);
            say_expr(t, p->split.point[g->out[i]].e);
            say(t, "\n");
        }
        say(t, "    kernel of %d instructions a cell, %d registers\n", mt_kernel_instructions(g->kernel),
            mt_kernel_registers(g->kernel));
        transforms += g->nin + g->nout;
    }
    say(t, "  transforms per step: %d (each way counted), in %d pairs of sweeps\n", transforms, p->stages);
}

mt_status mt_model_describe(mt_model *m, char **out, mt_error *err) {
    text t = {0};
    size_t bytes = 0;
    *out = NULL;
    mt_status st = mt_model_bytes(m, &bytes, err); /* derives */
    if (st) return st;
    say(&t, "Equations\n");
    if (m->energy) {
        say(&t, "  energy density ");
        say_expr(&t, m->energy);
        say(&t, "\n");
    }
    for (int i = 0; i < m->n; i++) say_mover(&t, m, &m->mover[i]);
    say(&t, m->noisy ? "One step (two evaluations: ETDRK2, for the thermal noise)\n" : "One step\n");
    say_stages(&t, &m->program);
    say(&t, "  memory %.4g MB (%.3g bytes per cell)\n", (double)bytes / 1e6,
        (double)bytes / (double)m->grid->cells);
    if (t.failed) {
        mt_free(t.buf);
        return mt_fail(err, MT_ENOMEM, "no memory for the description");
    }
    *out = t.buf;
    return MT_OK;
}
