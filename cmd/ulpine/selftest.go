package main

import (
	"fmt"
	"io"
	"runtime"
	"time"

	"github.com/spf13/cobra"

	"ulpine/quant"
)

func newSelftest() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "selftest",
		Short: "Hold the arithmetic on this machine to exact rationals and published values",
		Long: `Check the arithmetic on this machine, in under a minute: conversions against
published codes, every code and midpoint of narrow formats, every pair of 8-bit
operands, sampled wide formats, sums in every order and the fast products of
matrices against additions in exact rationals, random words against known answers,
exp and log against their series, and where sums stall.

Exit code 0 if all agree, 1 if any differs.`,
		Args: exactly(),
	}
	cmd.RunE = func(cmd *cobra.Command, _ []string) error {
		return runChecks(cmd.OutOrStdout(), selfChecks())
	}
	return cmd
}

// selfCheck is one group of comparisons.
type selfCheck struct {
	name string
	run  func(c *checker)
}

// selfChecks lists the groups.
func selfChecks() []selfCheck {
	return []selfCheck{
		{"figures of standard formats", checkFigures},
		{"conversions to published codes", checkConversions},
		{"every code of every format of at most 8 bits", checkCodes},
		{"every midpoint and its neighbours, at most 8 bits, seven roundings", checkMidpoints},
		{"sampled numbers, 16 bits and more, seven roundings", checkSamples},
		{"every pair of 8-bit operands, sum and product", checkPairs},
		{"stochastic rounding: every draw of few random bits", checkDraws},
		{"blocks with shared scales: a worked example", checkBlocks},
		{"sums in every order, one by one in exact rationals", checkSums},
		{"products of matrices: blocks of columns against single elements", checkProducts},
		{"where sums stall", checkStalls},
		{"random words: known answers", checkRandom},
		{"exp, log and others against their series", checkElementary},
		{"exp, log and others: the same bits as on other machines", checkElementaryBits},
	}
}

// checker counts comparisons and keeps the first that fails.
type checker struct {
	count  int
	failed int
	first  string
}

// that counts one comparison; the words are only put together where it fails.
func (c *checker) that(ok bool, format string, a ...any) {
	c.count++
	if ok {
		return
	}
	if c.failed == 0 {
		c.first = fmt.Sprintf(format, a...)
	}
	c.failed++
}

// noError counts an error as a failed comparison.
func (c *checker) noError(err error) bool {
	if err != nil {
		c.that(false, "%v", err)
	}
	return err == nil
}

// run runs one group; a panic fails it.
func (s selfCheck) runIn(c *checker) {
	defer func() {
		if p := recover(); p != nil {
			c.that(false, "panic: %v", p)
		}
	}()
	s.run(c)
	if c.count == 0 {
		c.that(false, "nothing was compared")
	}
}

// runChecks runs the groups and prints a line each and the verdict.
func runChecks(w io.Writer, checks []selfCheck) error {
	start := time.Now()
	fmt.Fprintf(w, "arithmetic version %d, %s, %s/%s\n\n", quant.ArithmeticVersion, runtime.Version(), runtime.GOOS, runtime.GOARCH)
	comparisons, failed := 0, 0
	for _, s := range checks {
		var c checker
		at := time.Now()
		s.runIn(&c)
		mark := "ok    "
		if c.failed > 0 {
			mark = "FAILED"
			failed++
		}
		fmt.Fprintf(w, "%s %9d  %6.2f s  %s\n", mark, c.count, time.Since(at).Seconds(), s.name)
		if c.failed > 0 {
			fmt.Fprintf(w, "       %d differ, the first: %s\n", c.failed, c.first)
		}
		comparisons += c.count
	}
	if failed > 0 {
		fmt.Fprintf(w, "\nfailed: %d of %d groups differ; do not trust results from this machine, and report it\n", failed, len(checks))
		return &exitError{exitFailed, fmt.Errorf("selftest: %d of %d groups differ", failed, len(checks))}
	}
	fmt.Fprintf(w, "\npassed: %d groups, %d comparisons, %.1f s\n", len(checks), comparisons, time.Since(start).Seconds())
	return nil
}
