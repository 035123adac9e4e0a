package main

import (
	"testing"
	"time"

	"ulpine/experiments/plan"
)

// TestStopWatch: epochs make groups, the first step none, and the faster half counts.
func TestStopWatch(t *testing.T) {
	enough := 0
	w := &stopWatch{enough: func() { enough++ }, each: 3, from: time.Now()}
	for done := 1; done <= 10; done++ {
		w.Progress(done, 100)
	}
	if len(w.groups) != 3 || w.first <= 0 || enough != 0 {
		t.Errorf("ten steps, three an epoch: %d groups, first step %v, stopped %d times", len(w.groups), w.first, enough)
	}
	w.from = time.Now().Add(-span)
	if w.Progress(11, 100); len(w.groups) != 4 || w.groups[3] < span.Seconds() || enough != 1 {
		t.Errorf("a long step: groups %v, stopped %d times", w.groups, enough)
	}
	w.groups = []float64{9, 1, 2, 7}
	if got := w.step(); got != 1.5 {
		t.Errorf("the faster half of 9, 1, 2, 7 is %v", got)
	}
	w.groups = nil
	if got := w.step(); got != w.first {
		t.Errorf("without groups a step takes %v, the first took %v", got, w.first)
	}
}

// TestMeasureRate on a plan with a pretraining and data of each replicate.
func TestMeasureRate(t *testing.T) {
	p, err := plan.Load("../../experiments/plans/first-look.toml")
	if err != nil {
		t.Fatal(err)
	}
	rate, err := measureRate(t.Context(), p)
	if err != nil || !(rate > 1e5 && rate < 1e12) {
		t.Errorf("%g multiply-adds a second, %v", rate, err)
	}
}
