/* Times OpenBLAS sgemm with one thread on one shape: the yardstick of the tables in
 * DEVELOPERS.md, never a dependency.
 *
 *   sgemm I J K MILLISECONDS
 *
 * prints GF (2 I J K over time) of the mean and of the fastest product in that time,
 * and the kernel that OpenBLAS chose for the processor. Time is the processor's, which
 * stands still while others have it. */
#define _GNU_SOURCE
#include <cblas.h>
#include <stdio.h>
#include <stdlib.h>
#include <time.h>

extern void openblas_set_num_threads(int);
extern char *openblas_get_corename(void);

static double now(void) {
	struct timespec t;
	clock_gettime(CLOCK_PROCESS_CPUTIME_ID, &t);
	return t.tv_sec + 1e-9 * t.tv_nsec;
}

int main(int argc, char **argv) {
	if (argc != 5) {
		fprintf(stderr, "usage: sgemm I J K MILLISECONDS\n");
		return 2;
	}
	const int m = atoi(argv[1]), n = atoi(argv[2]), k = atoi(argv[3]);
	const double budget = atof(argv[4]) / 1e3, work = 2.0 * m * n * k / 1e9;
	float *a = malloc(4L * m * k), *b = malloc(4L * k * n), *c = malloc(4L * m * n);
	for (long i = 0; i < (long)m * k; i++) a[i] = drand48() - 0.5;
	for (long i = 0; i < (long)k * n; i++) b[i] = drand48() - 0.5;
	openblas_set_num_threads(1);
	double best = 1e9, total = 0;
	int runs = 0;
	while (total < budget || runs < 3) {
		double t = now();
		cblas_sgemm(CblasRowMajor, CblasNoTrans, CblasNoTrans, m, n, k, 1, a, k, b, n, 0, c, n);
		t = now() - t;
		if (runs++ == 0) continue; /* the first warms up */
		total += t;
		if (t < best) best = t;
	}
	printf("%.2f %.2f %s\n", work * (runs - 1) / total, work / best, openblas_get_corename());
	return 0;
}
