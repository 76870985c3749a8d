/* Fits sums of Lorentzian bands with MINPACK's lmder (package libcminpack-dev), as a second opinion and as a rival in speed.

   cc -O3 -march=native -o bands bands.c -lcminpack -lm

   Reads problems from standard input until it ends, in doubles of this machine: the numbers n (channels), l (linear columns: the
   background, and profiles whose height alone counts), b (bands), s (starts); then x, y and the root of the weights, n each; the
   linear columns, l times n; and s starts of l + 3b parameters: coefficients, then height, position, width of each band.
   Writes for every start lmder's info and number of evaluations, the weighted sum of squares, and the parameters. With an
   argument R each start is fitted R times, and the seconds that all the fits took go to standard error. */

#include <cminpack-1/cminpack.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <time.h>

typedef struct {
	int n, l, b;
	const double *x, *y, *w, *column;
} problem;

static int evaluate(void *data, int m, int n, const double *p, double *r, double *jac, int ld, int what) {
	const problem *q = data;
	int i, k;
	(void)n;
	if (what == 1) {
		for (i = 0; i < m; i++) {
			r[i] = -q->y[i];
		}
		for (k = 0; k < q->l; k++) {
			const double *c = q->column + (size_t)k * m;
			for (i = 0; i < m; i++) {
				r[i] += p[k] * c[i];
			}
		}
		for (k = 0; k < q->b; k++) {
			const double *band = p + q->l + 3 * k, s = 2 / band[2];
			for (i = 0; i < m; i++) {
				double u = (q->x[i] - band[1]) * s;
				r[i] += band[0] / (1 + u * u);
			}
		}
		for (i = 0; i < m; i++) {
			r[i] *= q->w[i];
		}
		return 0;
	}
	for (k = 0; k < q->l; k++) {
		const double *c = q->column + (size_t)k * m;
		double *j = jac + (size_t)k * ld;
		for (i = 0; i < m; i++) {
			j[i] = c[i] * q->w[i];
		}
	}
	for (k = 0; k < q->b; k++) {
		const double *band = p + q->l + 3 * k, s = 2 / band[2];
		double *jh = jac + (size_t)(q->l + 3 * k) * ld, *jx = jh + ld, *jw = jx + ld;
		for (i = 0; i < m; i++) {
			double u = (q->x[i] - band[1]) * s, f = 1 / (1 + u * u), g = band[0] * s * u * f * f * q->w[i];
			jh[i] = f * q->w[i];
			jx[i] = 2 * g;
			jw[i] = u * g;
		}
	}
	return 0;
}

static double *take(size_t n) {
	double *v = malloc(n * sizeof *v);
	if (!v || fread(v, sizeof *v, n, stdin) != n) {
		fprintf(stderr, "bands: the input ends inside a problem\n");
		exit(1);
	}
	return v;
}

int main(int argc, char **argv) {
	int repeat = argc > 1 ? atoi(argv[1]) : 1, worst = 0;
	double head[4], seconds = 0;
	while (fread(head, sizeof *head, 4, stdin) == 4) {
		int n = (int)head[0], l = (int)head[1], b = (int)head[2], s = (int)head[3], params = l + 3 * b, i, t;
		double *x = take(n), *y = take(n), *w = take(n), *column = take((size_t)l * n), *start = take((size_t)s * params);
		problem q = {n, l, b, x, y, w, column};
		double *r = malloc(n * sizeof *r), *jac = malloc((size_t)n * params * sizeof *jac), *work = malloc((size_t)(7 * params + n) * sizeof *work);
		int *pivot = malloc(params * sizeof *pivot);
		for (t = 0; t < s; t++) {
			double *p = work + 6 * params + n, out[3], sum = 0;
			int info = 0, f = 0, g = 0, again;
			struct timespec from, to;
			clock_gettime(CLOCK_MONOTONIC, &from);
			for (again = 0; again < repeat; again++) {
				memcpy(p, start + (size_t)t * params, params * sizeof *p);
				info = lmder(evaluate, &q, n, params, p, r, jac, n, 1e-12, 1e-9, 0, 400, work, 1, 100, 0, &f, &g, pivot, work + params,
					work + 2 * params, work + 3 * params, work + 4 * params, work + 5 * params);
			}
			clock_gettime(CLOCK_MONOTONIC, &to);
			seconds += (to.tv_sec - from.tv_sec) + 1e-9 * (to.tv_nsec - from.tv_nsec);
			for (i = 0; i < n; i++) {
				sum += r[i] * r[i];
			}
			out[0] = info, out[1] = f, out[2] = sum;
			fwrite(out, sizeof *out, 3, stdout);
			fwrite(p, sizeof *p, params, stdout);
			worst |= info < 0;
		}
		free(x), free(y), free(w), free(column), free(start), free(r), free(jac), free(work), free(pivot);
	}
	if (argc > 1) {
		fprintf(stderr, "%.9f\n", seconds);
	}
	return worst;
}
