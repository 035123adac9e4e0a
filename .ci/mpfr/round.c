/* Rounds numbers with GNU MPFR, the outside opinion that compare.go holds package
 * quant to.
 *
 *   round OPERATION PRECISION EMIN EMAX MODE CLAMP <doubles >doubles
 *
 * OPERATION is round (one operand a result) or fma (three). PRECISION is the number
 * of significand bits; with significands in [1/2, 1) as MPFR has them, EMIN = 2 -
 * bias - fraction bits is the exponent of the least subnormal value and EMAX one
 * more than the largest exponent. MODE is N, Z, U or D. Results beyond CLAMP become
 * it, for formats that saturate below their largest binade's end; 0: none do.
 */
#include <math.h>
#include <mpfr.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>

static mpfr_rnd_t mode_of(char c) {
	switch (c) {
	case 'N': return MPFR_RNDN;
	case 'Z': return MPFR_RNDZ;
	case 'U': return MPFR_RNDU;
	case 'D': return MPFR_RNDD;
	}
	fprintf(stderr, "round: unknown mode %c\n", c);
	exit(2);
}

int main(int argc, char **argv) {
	if (argc != 7) {
		fprintf(stderr, "usage: round OPERATION PRECISION EMIN EMAX MODE CLAMP\n");
		return 2;
	}
	int fused = strcmp(argv[1], "fma") == 0;
	size_t operands = fused ? 3 : 1;
	long precision = atol(argv[2]), emin = atol(argv[3]), emax = atol(argv[4]);
	mpfr_rnd_t mode = mode_of(argv[5][0]);
	double clamp = atof(argv[6]), in[3];
	mpfr_t x, a, b, c;
	mpfr_init2(x, precision);
	mpfr_inits2(53, a, b, c, (mpfr_ptr)0);
	mpfr_exp_t wide_min = mpfr_get_emin(), wide_max = mpfr_get_emax();
	while (fread(in, sizeof in[0], operands, stdin) == operands) {
		/* The operands are exact: only the result has the format's exponents. */
		mpfr_set_emin(wide_min);
		mpfr_set_emax(wide_max);
		mpfr_set_d(a, in[0], MPFR_RNDN);
		int t;
		if (fused) {
			mpfr_set_d(b, in[1], MPFR_RNDN);
			mpfr_set_d(c, in[2], MPFR_RNDN);
			t = mpfr_fma(x, a, b, c, mode);
		} else {
			t = mpfr_set(x, a, mode);
		}
		/* The ternary value goes on, so that the bits a subnormal result loses are
		 * not rounded twice. */
		mpfr_set_emin(emin);
		mpfr_set_emax(emax);
		t = mpfr_check_range(x, t, mode);
		mpfr_subnormalize(x, t, mode);
		double r = mpfr_get_d(x, MPFR_RNDN);
		if (clamp != 0 && fabs(r) > clamp)
			r = copysign(clamp, r);
		if (fwrite(&r, sizeof r, 1, stdout) != 1)
			return 1;
	}
	mpfr_clears(x, a, b, c, (mpfr_ptr)0);
	mpfr_free_cache();
	return fflush(stdout) ? 1 : 0;
}
