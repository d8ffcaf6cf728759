//go:build klu

#define _GNU_SOURCE
#include <math.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>
#include <klu.h>
#include "loop.h"

struct loop {
	system_of s;
	klu_common common;
	klu_symbolic *symbolic;
	klu_numeric *numeric;
	double *v, *next;
};

static void *copy(const void *from, size_t bytes)
{
	void *to = malloc(bytes ? bytes : 1);
	if (to && bytes)
		memcpy(to, from, bytes);
	return to;
}

/* loop_new copies the system and factors its matrix; NULL: it is singular, or there is no
   memory. */
loop *loop_new(const system_of *s)
{
	loop *l = calloc(1, sizeof *l);
	if (!l)
		return NULL;
	size_t n = s->n, m = s->n + s->extra, nz = s->start[n], terms = s->term[s->extra];
	l->s = *s;
	l->s.start = copy(s->start, (n + 1) * sizeof(int32_t));
	l->s.row = copy(s->row, nz * sizeof(int32_t));
	l->s.value = copy(s->value, nz * 2 * sizeof(double));
	l->s.pull = copy(s->pull, n * 2 * sizeof(double));
	l->s.per_unit2 = copy(s->per_unit2, m * sizeof(double));
	l->s.constant = copy(s->constant, s->extra * 2 * sizeof(double));
	l->s.term = copy(s->term, (s->extra + 1) * sizeof(int32_t));
	l->s.column = copy(s->column, terms * sizeof(int32_t));
	l->s.coef = copy(s->coef, terms * sizeof(double));
	l->s.injections = copy(s->injections, s->count * sizeof(injection));
	l->v = calloc(m, 2 * sizeof(double));
	l->next = calloc(m, 2 * sizeof(double));
	if (!l->s.start || !l->s.row || !l->s.value || !l->s.pull || !l->s.per_unit2 || !l->s.constant ||
	    !l->s.term || !l->s.column || !l->s.coef || !l->s.injections || !l->v || !l->next) {
		loop_free(l);
		return NULL;
	}
	klu_defaults(&l->common);
	/* At its best: without its row scaling, which costs a tenth of a solution and more
	   and which these matrices do not need, and without a search for blocks, of which a
	   connected feeder has one. */
	l->common.scale = 0;
	l->common.btf = 0;
	l->symbolic = klu_analyze(s->n, l->s.start, l->s.row, &l->common);
	if (l->symbolic)
		l->numeric = klu_z_factor(l->s.start, l->s.row, l->s.value, l->symbolic, &l->common);
	if (!l->numeric || l->common.status != KLU_OK) {
		loop_free(l);
		return NULL;
	}
	return l;
}

void loop_free(loop *l)
{
	if (!l)
		return;
	if (l->numeric)
		klu_z_free_numeric(&l->numeric, &l->common);
	if (l->symbolic)
		klu_free_symbolic(&l->symbolic, &l->common);
	free(l->s.start), free(l->s.row), free(l->s.value), free(l->s.pull), free(l->s.per_unit2), free(l->s.constant);
	free(l->s.term), free(l->s.column), free(l->s.coef), free(l->s.injections), free(l->v), free(l->next);
	free(l);
}

/* loop_voltages are the voltages at hand, n independent and the extra ones. */
double *loop_voltages(loop *l)
{
	return l->v;
}

/* currents sets b to the pull and takes off what the injections draw at v. */
static void currents(const system_of *s, double *restrict b, const double *restrict v, const double *restrict power)
{
	memcpy(b, s->pull, 2 * sizeof(double) * s->n);
	memset(b + 2 * s->n, 0, 2 * sizeof(double) * s->extra);
	for (int32_t k = 0; k < s->count; k++) {
		const injection *j = &s->injections[k];
		double re = v[2 * j->from], im = v[2 * j->from + 1];
		if (j->to >= 0)
			re -= v[2 * j->to], im -= v[2 * j->to + 1];
		double m2 = re * re + im * im, p = power[2 * k], q = power[2 * k + 1];
		/* conj(p + jq)/conj(v) = (p - jq)*v/|v|^2; p and q become those over |v|^2. */
		if (m2 < j->least) {
			p *= j->pl, q *= j->ql;
		} else if (k < s->plain) {
			double d = 1 / m2;
			p *= d, q *= d;
		} else {
			double d = 1 / m2, r = sqrt(d);
			p *= j->pz + j->pi * r + j->pc * d;
			q *= j->qz + j->qi * r + j->qc * d;
		}
		double ire = p * re + q * im, iim = p * im - q * re;
		b[2 * j->from] -= ire, b[2 * j->from + 1] -= iim;
		if (j->to >= 0)
			b[2 * j->to] += ire, b[2 * j->to + 1] += iim;
	}
	for (int32_t e = 0; e < s->extra; e++) {
		double re = b[2 * (s->n + e)], im = b[2 * (s->n + e) + 1];
		for (int32_t t = s->term[e]; t < s->term[e + 1]; t++) {
			b[2 * s->column[t]] += s->coef[t] * re;
			b[2 * s->column[t] + 1] += s->coef[t] * im;
		}
	}
}

/* change is the largest |next - v|^2 in p.u. */
static double change(const system_of *s, const double *restrict next, const double *restrict v)
{
	double worst = 0;
	int32_t m = s->n + s->extra;
	for (int32_t u = 0; u < m; u++) {
		double re = next[2 * u] - v[2 * u], im = next[2 * u + 1] - v[2 * u + 1];
		double d = (re * re + im * im) * s->per_unit2[u];
		worst = d > worst ? d : worst;
	}
	return worst;
}

/* loop_run solves steps one after another from the voltages at hand, each by at most most
   iterations until no voltage moves by more than the tolerance in p.u. It returns how
   many steps have been solved. power is by step and injection, VA. */
int loop_run(loop *l, int steps, const double *power, double tolerance, int most, long *iterations)
{
	const system_of *s = &l->s;
	double t2 = tolerance * tolerance;
	for (int step = 0; step < steps; step++, power += 2 * s->count) {
		int k = 0;
		for (;;) {
			if (k++ == most)
				return step;
			double *b = l->next;
			currents(s, b, l->v, power);
			if (!klu_z_solve(l->symbolic, l->numeric, s->n, 1, b, &l->common))
				return step;
			for (int32_t e = 0; e < s->extra; e++) {
				double re = s->constant[2 * e], im = s->constant[2 * e + 1];
				for (int32_t t = s->term[e]; t < s->term[e + 1]; t++) {
					re += s->coef[t] * b[2 * s->column[t]];
					im += s->coef[t] * b[2 * s->column[t] + 1];
				}
				b[2 * (s->n + e)] = re, b[2 * (s->n + e) + 1] = im;
			}
			double d = change(s, b, l->v);
			l->next = l->v, l->v = b;
			if (d < t2)
				break;
		}
		*iterations += k;
	}
	return steps;
}

double thread_seconds(void)
{
	struct timespec t;
	clock_gettime(CLOCK_THREAD_CPUTIME_ID, &t);
	return t.tv_sec + 1e-9 * t.tv_nsec;
}
