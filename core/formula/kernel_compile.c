/* From expressions to a register program, in small passes: number the nodes (arguments first; uniform parts
 * become scalars, polynomials in one operand become one instruction), count uses, emit with registers reused
 * after the last use, verify. Stores and reductions stand at the end of a tile's program, so an output array
 * may be one of the inputs. */
#include "core/formula/kernel_inside.h"
#include "core/formula/map.h"

#include <math.h>
#include <string.h>

#include "core/base/memory.h"

#define MOST_DEGREE 12

/* A node that gets a value in a register. */
typedef struct item {
    const mt_expr *e;
    int uses, reg;
    bool poly;
    const mt_expr *base; /* poly */
    int degree;
    mt_scalar coefficient[MOST_DEGREE + 1];
} item;

typedef struct compiler {
    mt_kernel *k;
    const mt_kernel_spec *spec;
    int n, room;
    item *item;
    mt_map number; /* node -> item + 1 */
    int free_count, free_room;
    int *free_register;
    mt_status status;
    mt_error *err;
} compiler;

static bool no_memory(compiler *c) {
    if (!c->status) c->status = mt_fail(c->err, MT_ENOMEM, "no memory for a kernel");
    return false;
}

static bool grow(compiler *c, void *array, int n, int *room, size_t size) {
    if (c->status) return false;
    if (n < *room) return true;
    int more = *room ? 2 * *room : 16;
    void *old, *fresh;
    memcpy(&old, array, sizeof old);
    fresh = mt_resize(old, (size_t)more, size);
    if (!fresh) return no_memory(c);
    memcpy(array, &fresh, sizeof fresh);
    *room = more;
    return true;
}

static int input_number(const compiler *c, const mt_expr *e) {
    for (int i = 0; i < c->spec->nin; i++)
        if (c->spec->in[i] == e) return i;
    return -1;
}

static int add_scalar(compiler *c, const mt_expr *e, double sign) {
    mt_kernel *k = c->k;
    if (!grow(c, &k->scalar, k->scalars, &k->scalar_room, sizeof *k->scalar)) return 0;
    k->scalar[k->scalars] = (mt_scalar){e ? mt_expr_ref(e) : NULL, sign};
    return k->scalars++;
}

static int share_scalar(compiler *c, const mt_expr *e) {
    for (int i = 0; i < c->k->scalars; i++)
        if (c->k->scalar[i].e == e && c->k->scalar[i].sign == 1) return i;
    return add_scalar(c, e, 1);
}

/* --- polynomials
 * -----------------------------------------------------------------------------------------------------------------
 */

/* x^n with whole n >= 1 */
static const mt_expr *power_base(const mt_expr *e, int *n) {
    *n = 1;
    if (e->op != MT_POW_OP || e->arg[1]->op != MT_CONST_OP) return e;
    double p = e->arg[1]->value;
    if (p != floor(p) || p < 1 || p > MOST_DEGREE) return e;
    *n = (int)p;
    return e->arg[0];
}

static bool add_coefficient(item *p, int degree, const mt_expr *e, double sign) {
    if (degree > MOST_DEGREE || p->coefficient[degree].sign != 0) return false;
    p->coefficient[degree] = (mt_scalar){e, sign};
    if (degree > p->degree) p->degree = degree;
    return true;
}

/* Adds sign * e to the polynomial; false if e is not uniform * base^n for one base. */
static bool gather_poly(item *p, const mt_expr *e, double sign) {
    int n;
    if (mt_expr_uniform(e)) return add_coefficient(p, 0, e, sign);
    switch (e->op) {
    case MT_ADD_OP: return gather_poly(p, e->arg[0], sign) && gather_poly(p, e->arg[1], sign);
    case MT_SUB_OP: return gather_poly(p, e->arg[0], sign) && gather_poly(p, e->arg[1], -sign);
    case MT_NEG_OP: return gather_poly(p, e->arg[0], -sign);
    default: break;
    }
    const mt_expr *factor = NULL, *rest = e;
    for (int i = 0; i < 2 && e->op == MT_MUL_OP && !factor; i++)
        if (mt_expr_uniform(e->arg[i])) factor = e->arg[i], rest = e->arg[1 - i];
    const mt_expr *base = power_base(rest, &n);
    if (p->base && p->base != base) return false;
    p->base = base;
    return add_coefficient(p, n, factor, sign);
}

static bool as_poly(compiler *c, const mt_expr *e, item *p) {
    *p = (item){.e = e};
    if (c->spec->literal || (e->op != MT_ADD_OP && e->op != MT_SUB_OP)) return false;
    if (input_number(c, e) >= 0 || !gather_poly(p, e, 1) || p->degree < 2) return false;
    p->poly = true;
    return true;
}

/* --- numbering
 * ---------------------------------------------------------------------------------------------------------------------
 */

static void visit(compiler *c, const mt_expr *e);

static bool computable(compiler *c, const mt_expr *e) {
    char text[300];
    if (e->op != MT_FIELD_OP && !mt_op_spectral(e->op) && e->op != MT_GRADSQ_OP) return true;
    mt_expr_print(e, text, sizeof text);
    c->status = mt_fail(c->err, MT_EINPUT, "'%s' has no array among the inputs of the kernel", text);
    return false;
}

static int whole_power(const mt_expr *e) {
    if (e->op != MT_POW_OP || e->arg[1]->op != MT_CONST_OP) return 0;
    double p = e->arg[1]->value;
    return p == floor(p) && fabs(p) <= 64 ? (int)p : 0;
}

static void visit_arguments(compiler *c, const item *it) {
    if (it->poly) {
        visit(c, it->base);
        return;
    }
    for (int i = 0; i < it->e->nargs; i++)
        if (!(i == 1 && whole_power(it->e))) visit(c, it->e->arg[i]);
}

static void visit(compiler *c, const mt_expr *e) {
    item it;
    if (c->status || mt_expr_uniform(e) || input_number(c, e) >= 0) return;
    uintptr_t *known = mt_map_at(&c->number, e, false);
    if (known) {
        c->item[*known - 1].uses++;
        return;
    }
    if (!computable(c, e)) return;
    as_poly(c, e, &it);
    if (!it.poly) it = (item){.e = e};
    visit_arguments(c, &it);
    known = mt_map_at(&c->number, e, true);
    if (!known) no_memory(c);
    if (!grow(c, &c->item, c->n, &c->room, sizeof *c->item)) return;
    it.uses = 1;
    it.reg = -1;
    c->item[c->n] = it;
    *known = (uintptr_t)++c->n;
}

/* --- emission
 * ----------------------------------------------------------------------------------------------------------------------
 */

static mt_operand operand(compiler *c, const mt_expr *e) {
    if (mt_expr_uniform(e)) return (mt_operand){MT_IN_SCALAR, share_scalar(c, e)};
    int input = input_number(c, e);
    if (input >= 0) return (mt_operand){MT_IN_INPUT, input};
    uintptr_t *known = mt_map_at(&c->number, e, false);
    return (mt_operand){MT_IN_REGISTER, known ? c->item[*known - 1].reg : 0};
}

static int take_register(compiler *c) {
    if (c->free_count) return c->free_register[--c->free_count];
    return c->k->registers++;
}

static void used(compiler *c, const mt_expr *e) {
    uintptr_t *known = mt_map_at(&c->number, e, false);
    if (!known || c->status) return;
    item *it = &c->item[*known - 1];
    if (--it->uses > 0) return;
    if (grow(c, &c->free_register, c->free_count, &c->free_room, sizeof *c->free_register))
        c->free_register[c->free_count++] = it->reg;
}

static void emit(compiler *c, item *it) {
    mt_kernel *k = c->k;
    const mt_expr *e = it->e;
    mt_instruction x = {.code = (int)e->op, .axis = e->axis, .random = e->random, .seed = e->seed};
    if (!grow(c, &k->code, k->n, &k->room, sizeof *k->code)) return;
    if (it->poly) {
        x.code = MT_CODE_POLY;
        x.degree = it->degree;
        x.a[0] = operand(c, it->base);
        x.coefficients = k->scalars;
        for (int i = 0; i <= it->degree; i++) add_scalar(c, it->coefficient[i].e, it->coefficient[i].sign);
        used(c, it->base);
    } else {
        x.power = whole_power(e);
        for (int i = 0; i < e->nargs; i++)
            if (!(i == 1 && x.power)) x.a[i] = operand(c, e->arg[i]);
        for (int i = 0; i < e->nargs; i++)
            if (!(i == 1 && x.power)) used(c, e->arg[i]);
    }
    x.to = it->reg =
        take_register(c); /* may be a register just freed: every loop reads a place before it writes it */
    k->code[k->n++] = x;
}

static mt_operand stored(compiler *c, const mt_expr *e) {
    mt_kernel *k = c->k;
    mt_operand a = operand(c, e);
    if (a.where != MT_IN_INPUT || k->nout < 2) return a;
    if (!grow(c, &k->code, k->n, &k->room, sizeof *k->code)) return a;
    k->code[k->n] = (mt_instruction){.code = MT_CODE_COPY, .to = k->registers++, .a = {a}};
    return (mt_operand){MT_IN_REGISTER, k->code[k->n++].to};
}

/* Registers within the program, arrays within the spec: a wrong program would write anywhere. */
static void verify(compiler *c) {
    const mt_kernel *k = c->k;
    for (int i = 0; i < k->n && !c->status; i++) {
        bool good = k->code[i].to >= 0 && k->code[i].to < k->registers;
        for (int j = 0; j < 3; j++) {
            mt_operand a = k->code[i].a[j];
            int most = a.where == MT_IN_REGISTER ? k->registers
                       : a.where == MT_IN_INPUT  ? k->nin
                                                 : k->scalars;
            if (a.where != MT_IN_NOWHERE) good = good && a.number >= 0 && a.number < most;
        }
        if (!good) c->status = mt_fail(c->err, MT_EINPUT, "kernel instruction %d is malformed", i);
    }
}

static void compile(compiler *c) {
    const mt_kernel_spec *s = c->spec;
    mt_kernel *k = c->k;
    for (int i = 0; i < s->nout; i++) visit(c, s->out[i]);
    for (int i = 0; i < s->nreduced; i++) visit(c, s->reduced[i]);
    for (int i = 0; i < c->n && !c->status; i++) emit(c, &c->item[i]);
    for (int i = 0; i < s->nout && !c->status; i++) k->out[i] = stored(c, s->out[i]);
    for (int i = 0; i < s->nreduced && !c->status; i++) {
        k->reduced[i] = operand(c, s->reduced[i]);
        k->reduce[i] = s->reduce[i];
    }
    verify(c);
    if (!c->status)
        c->status = mt_new(&k->value, (size_t)k->scalars + 1, sizeof *k->value, "a kernel", c->err);
}

static mt_status name_inputs(mt_kernel *k, const mt_kernel_spec *spec, mt_error *err) {
    char text[80];
    mt_status st = mt_new(&k->in_name, (size_t)spec->nin + 1, sizeof *k->in_name, "a kernel", err);
    for (int i = 0; i < spec->nin && !st; i++) {
        mt_expr_print(spec->in[i], text, sizeof text);
        k->in_name[i] = mt_copy_text(text);
        if (!k->in_name[i]) st = mt_fail(err, MT_ENOMEM, "no memory for a kernel");
    }
    return st;
}

mt_status mt_kernel_new(mt_kernel **out, const mt_kernel_spec *spec, mt_error *err) {
    mt_kernel *k;
    *out = NULL;
    mt_status st = mt_new(&k, 1, sizeof *k, "a kernel", err);
    if (st) return st;
    k->nin = spec->nin, k->nout = spec->nout, k->nreduced = spec->nreduced;
    st = name_inputs(k, spec, err);
    if (!st) st = mt_new(&k->out, (size_t)k->nout + 1, sizeof *k->out, "a kernel", err);
    if (!st) st = mt_new(&k->reduced, (size_t)k->nreduced + 1, sizeof *k->reduced, "a kernel", err);
    if (!st) st = mt_new(&k->reduce, (size_t)k->nreduced + 1, sizeof *k->reduce, "a kernel", err);
    compiler c = {.k = k, .spec = spec, .status = st, .err = err};
    if (!st) compile(&c);
    mt_free(c.item), mt_free(c.free_register);
    mt_map_end(&c.number);
    if (c.status) mt_kernel_free(&k);
    *out = k;
    return c.status;
}

void mt_kernel_free(mt_kernel **kernel) {
    mt_kernel *k = *kernel;
    *kernel = NULL;
    if (!k) return;
    for (int i = 0; i < k->scalars; i++) mt_expr_unref(&k->scalar[i].e);
    for (int i = 0; i < k->nin && k->in_name; i++) mt_free(k->in_name[i]);
    mt_free(k->in_name), mt_free(k->code), mt_free(k->scalar), mt_free(k->value);
    mt_free(k->out), mt_free(k->reduced), mt_free(k->reduce);
    mt_free(k);
}
