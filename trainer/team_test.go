package trainer

import (
	"context"
	"sync"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"

	"ulpine/quant"
)

// TestTeamChangesNoBit trains a small convolutional network, whose products are large
// enough to be shared, alone and with helpers: steps, weights and counters are equal.
func TestTeamChangesNoBit(t *testing.T) {
	input := []int{1, 28, 28}
	layers := []string{"conv2d out=8 size=5", "relu", "maxpool size=2", "dense 120", "relu", "dense 10"}
	for _, point := range []quant.Point{point(t, "fp32"), point(t, "E4M3"), stochastic(t, "fp16", 16)} {
		training := sgdTraining(64, 1)
		training.Optimizer.Momentum = 0.9
		job := Job{
			Network: network(t, input, layers...), Arm: Everything(point, len(layers), 1), Training: training, Seed: 1,
			Train: dataset(150, input, 10, 1), Test: dataset(80, input, 10, 2),
		}
		run := func() Outcome {
			o, err := Run(context.Background(), job, nil)
			if err != nil {
				t.Fatal(err)
			}
			return o
		}
		alone := run()
		for _, workers := range []int{1, 2, 3} {
			if testing.Short() && workers != 2 {
				continue
			}
			job.Team = NewTeam(workers)
			stop := make(chan struct{})
			var helpers sync.WaitGroup
			for range workers {
				helpers.Go(func() { job.Team.Help(stop) })
			}
			if diff := cmp.Diff(alone, run(), cmpopts.EquateNaNs(), cmp.AllowUnexported(Scores{})); diff != "" {
				t.Errorf("%v with %d helpers: another outcome:\n%s", point, workers, diff)
			}
			close(stop)
			helpers.Wait()
		}
	}
}
