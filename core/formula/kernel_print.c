/* A kernel's program as text. */
#include "core/formula/kernel_inside.h"

#include <stdarg.h>
#include <stdio.h>

typedef struct out {
    char *buf;
    size_t size, n;
} out;

static void say(out *o, const char *format, ...) MT_PRINTF(2, 3);
static void say(out *o, const char *format, ...) {
    va_list args;
    va_start(args, format);
    int n =
        vsnprintf(o->n < o->size ? o->buf + o->n : NULL, o->n < o->size ? o->size - o->n : 0, format, args);
    va_end(args);
    if (n > 0) o->n += (size_t)n;
}

static void say_scalar(out *o, const mt_scalar *s) {
    char text[60];
    if (!s->e) {
        say(o, "%g", s->sign);
        return;
    }
    mt_expr_print(s->e, text, sizeof text);
    say(o, "%s%s", s->sign < 0 ? "-" : "", text);
}

static void say_operand(out *o, const mt_kernel *k, mt_operand a) {
    if (a.where == MT_IN_REGISTER)
        say(o, "r%d", a.number);
    else if (a.where == MT_IN_INPUT)
        say(o, "[%s]", k->in_name[a.number]);
    else
        say_scalar(o, &k->scalar[a.number]);
}

static void say_instruction(out *o, const mt_kernel *k, const mt_instruction *x) {
    say(o, "r%d = ", x->to);
    if (x->code == MT_CODE_POLY) {
        say(o, "poly%d(", x->degree);
        say_operand(o, k, x->a[0]);
        for (int i = 0; i <= x->degree; i++) {
            say(o, i ? ", " : "; ");
            say_scalar(o, &k->scalar[x->coefficients + i]);
        }
        say(o, ")\n");
        return;
    }
    say(o, "%s(", x->code == MT_CODE_COPY ? "COPY" : mt_op_name((mt_op)x->code));
    for (int i = 0; i < 3 && x->a[i].where != MT_IN_NOWHERE; i++) {
        if (i) say(o, ", ");
        say_operand(o, k, x->a[i]);
    }
    if (x->power) say(o, ", %d", x->power);
    say(o, ")\n");
}

size_t mt_kernel_print(const mt_kernel *k, char *buf, size_t size) {
    static const char *how[] = {"sum", "min", "max"};
    out o = {buf, size, 0};
    if (size) buf[0] = 0;
    for (int i = 0; i < k->n; i++) say_instruction(&o, k, &k->code[i]);
    for (int i = 0; i < k->nreduced; i++) {
        say(&o, "%s ", how[k->reduce[i]]);
        say_operand(&o, k, k->reduced[i]);
        say(&o, "\n");
    }
    for (int i = 0; i < k->nout; i++) {
        say(&o, "out%d = ", i);
        say_operand(&o, k, k->out[i]);
        say(&o, "\n");
    }
    return o.n;
}
