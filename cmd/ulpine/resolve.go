package main

import (
	"context"
	"fmt"
	"runtime"
	"time"

	"github.com/spf13/cobra"
	"gorgonia.org/tensor"

	"ulpine/experiments/plan"
	"ulpine/quant/random"
	"ulpine/trainer"
)

func newResolve() *cobra.Command {
	cmd := &cobra.Command{
		Use:   "resolve PLAN",
		Short: "Spell a plan out: every rounding point, shape, sum and run",
		Long: `Check a plan and print it with nothing left to a default: the rounding points of
each layer and arm, the shapes, the length of every sum, the number of runs, and
an estimate of the time, for which a few steps of the arms, of sixteen if there
are more, are timed on invented numbers.`,
		Args: exactly("PLAN"),
	}
	full := cmd.Flags().Bool("full", false, "a line for each point of each layer")
	workers := cmd.Flags().Int("workers", 0, "runs at a time, for the estimate (0: one a core)")
	cmd.RunE = func(cmd *cobra.Command, args []string) error {
		p, err := loadPlan(args[0], cmd.ErrOrStderr())
		if err != nil {
			return err
		}
		if *workers <= 0 {
			*workers = runtime.GOMAXPROCS(0)
		}
		rate, err := measureRate(cmd.Context(), p)
		if err != nil {
			return err
		}
		_, err = fmt.Fprint(cmd.OutOrStdout(), plan.ResolveText(p, plan.ResolveOptions{
			Full: *full, Rate: rate, Workers: *workers,
		}))
		return err
	}
	return cmd
}

// timed is the number of arms that are timed for an estimate: the baseline and
// others at equal distances, as neighbours in a grid are alike.
const timed = 16

// measureRate times a few training steps of an arm, of all arms if they are few,
// and returns multiply-adds a second of one worker.
func measureRate(ctx context.Context, p *plan.Plan) (float64, error) {
	const batches = 3
	var macs uint64
	var spent time.Duration
	arms := min(len(p.Arms), timed)
	for k := range arms {
		i := k * len(p.Arms) / arms
		t := p.Arms[i].Training
		t.Epochs = 1
		t.LearningRate = trainer.Schedule{Start: t.LearningRate.Start} // a schedule may need more steps
		n := batches * t.Batch
		job := trainer.Job{
			Network: p.Network, Arm: p.Arms[i].Arithmetic, Training: t, Seed: 1,
			Train: inventedSet(p.Network, n, t.Regression()),
		}
		job.Arm.Stages = nil // a few steps of the first one tell
		began := time.Now()
		if _, err := trainer.Run(ctx, job, nil); err != nil {
			return 0, err
		}
		spent += time.Since(began)
		macs += trainer.Describe(p.Network, &job.Arm, t, trainer.Sizes{Train: n}).TotalMACs
	}
	return float64(macs) / spent.Seconds(), nil
}

// inventedSet is n examples of normal numbers with labels in turn, or with normal
// numbers as targets.
func inventedSet(n trainer.Network, examples int, regression bool) trainer.Set {
	shape := append([]int{examples}, n.Input...)
	set := trainer.Set{
		Inputs: tensor.New(tensor.WithShape(shape...), tensor.Of(tensor.Float32)),
		Labels: make([]int32, examples),
	}
	draws := random.Draws{Seed: random.Derive(1, random.Data)}
	for i, values := 0, set.Inputs.Float32s(); i < len(values); i++ {
		values[i] = float32(draws.Normal(uint64(i)))
	}
	if regression {
		set.Labels, set.Targets = nil, tensor.New(tensor.WithShape(examples, n.Outputs()), tensor.Of(tensor.Float32))
		draws.Site = 1
		for i, values := 0, set.Targets.Float32s(); i < len(values); i++ {
			values[i] = float32(draws.Normal(uint64(i)))
		}
		return set
	}
	for i := range set.Labels {
		set.Labels[i] = int32(i % n.Outputs())
	}
	return set
}
