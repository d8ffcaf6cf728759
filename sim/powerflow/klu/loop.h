//go:build klu

#ifndef YARDSTICK_LOOP_H
#define YARDSTICK_LOOP_H

#include <stdint.h>

/* Complex numbers are pairs of doubles throughout: C99's complex product looks for
   infinities at every step. */

/* An injection as package powerflow has it, ready for use: see loop.c. */
typedef struct {
	int32_t from, to; /* entries of v; to below 0: ground */
	double least;     /* |v|^2 below which it is a constant admittance, V^2 */
	double pz, pi, pc, qz, qi, qc; /* of v^2/nominal^2, |v|/nominal, 1 */
	double pl, ql;    /* below least, of v^2 */
} injection;

/* What the loop needs of a network. Voltages are one vector: n independent ones, then
   extra ones that follow from them: v[n+e] = constant[e] + sum coef*v[column]. */
typedef struct {
	int32_t n, extra;
	int32_t *start, *row;  /* the matrix by columns, both triangles */
	double *value;
	double *pull;          /* n, A */
	double *per_unit2;     /* n+extra, 1/V^2 */
	double *constant;      /* extra, V */
	int32_t *term;         /* extra+1, into column and coef */
	int32_t *column;
	double *coef;
	int32_t plain, count;  /* the first plain injections are constant power to ground */
	injection *injections;
} system_of;

typedef struct loop loop;

loop *loop_new(const system_of *s);
void loop_free(loop *l);
double *loop_voltages(loop *l);
int loop_run(loop *l, int steps, const double *power, double tolerance, int most, long *iterations);
double thread_seconds(void);

#endif
