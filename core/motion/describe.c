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

static void say_mover(text *t, const mt_mover *v) {
    const char *name = v->field->symbol->name;
    say(t, "  field %s (%s)\n", name, motion_text(v->motion));
    if (v->motion == MT_MOTION_STILL) return;
    if (v->potential) {
        say(t, "    potential  dF/d%s = ", name);
        say_expr(t, v->potential);
        say(t,
            v->motion == MT_MOTION_CONSERVE ? "\n    equation   d%s/dt = div( M grad( dF/d%s ) ), M = "
                                            : "\n    equation   d%s/dt = -L dF/d%s, L = ",
            name, name);
        say_expr(t, v->given);
    } else {
        say(t, "    equation   d%s/dt = ", name);
        say_expr(t, v->rhs);
    }
    say(t, "\n    linear part, exact in k     ");
    say_expr(t, v->linear);
    say(t, "\n    taken implicitly            ");
    say_expr(t, v->implicit);
    for (int j = 0; j < v->dominates; j++)
        say(t, "%s",
            j ? ""
              : "\n      stabilisation = theta times the largest value over the cells of the coefficient");
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
    for (int i = 0; i < m->n; i++) say_mover(&t, &m->mover[i]);
    say(&t, "One step\n");
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
