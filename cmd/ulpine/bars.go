package main

import (
	"fmt"
	"io"
	"sync"

	"github.com/vbauerster/mpb/v8"
	"github.com/vbauerster/mpb/v8/decor"

	"ulpine/experiments"
	"ulpine/results"
)

// bars is progress on a terminal: a line in words for the whole plan and a bar
// for each worker.
type bars struct {
	container *mpb.Progress
	whole     *mpb.Bar
	workers   map[int]*workerBar
	mu        sync.Mutex // guards the texts, which the container's goroutine reads
	text      string
}

type workerBar struct {
	bar  *mpb.Bar
	text string
}

func newBars(w io.Writer) *bars {
	b := &bars{workers: map[int]*workerBar{}, text: "reading data"}
	b.container = mpb.New(mpb.WithOutput(w), mpb.WithWidth(40), mpb.WithAutoRefresh())
	b.whole = b.container.AddBar(0,
		mpb.BarFillerClearOnComplete(),
		mpb.BarRemoveOnComplete(),
		mpb.BarPriority(-1),
		mpb.PrependDecorators(decor.Any(func(decor.Statistics) string { return b.read(&b.text) })),
		mpb.BarWidth(1))
	return b
}

func (b *bars) read(s *string) string {
	b.mu.Lock()
	defer b.mu.Unlock()
	return *s
}

func (b *bars) write(s *string, text string) {
	b.mu.Lock()
	defer b.mu.Unlock()
	*s = text
}

// worker returns the bar of a worker, made when it is first seen.
func (b *bars) worker(n int) *workerBar {
	if w := b.workers[n]; w != nil {
		return w
	}
	w := &workerBar{}
	w.bar = b.container.New(0, // a total of its own can only be set on a bar that starts without one
		mpb.BarStyle().Lbound("").Filler("█").Tip("▌").Padding("·").Rbound(""),
		mpb.BarRemoveOnComplete(),
		mpb.BarPriority(n),
		mpb.AppendDecorators(decor.Any(func(decor.Statistics) string { return " " + b.read(&w.text) })))
	b.workers[n] = w
	return w
}

func (b *bars) Started(p experiments.Place) {
	w := b.worker(p.Worker)
	b.write(&w.text, fmt.Sprintf("%s (%s)", results.RunName(p.Arm, p.Replicate), p))
	w.bar.SetCurrent(0)
}

func (b *bars) Step(s experiments.Step) {
	w := b.worker(s.Worker)
	// One more than there is, so that the bar is never complete and goes on with
	// the worker's next run.
	w.bar.SetTotal(int64(s.Total)+1, false)
	w.bar.SetCurrent(int64(s.Done))
	b.write(&b.text, fmt.Sprintf("%s, %s", s.Place, s.Overall))
}

func (b *bars) Finished(f experiments.Finish) {
	if f.State == results.Failed || f.Diverged != "" {
		b.Note(finishWords(f))
	}
	b.write(&b.text, fmt.Sprintf("%s, %s", f.Place, f.Overall))
}

// Note prints a line above the bars.
func (b *bars) Note(text string) { fmt.Fprintln(b.container, text) }

func (b *bars) close() {
	for _, w := range b.workers {
		w.bar.Abort(true)
	}
	b.whole.Abort(true)
	b.container.Wait()
}
