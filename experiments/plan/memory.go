package plan

import (
	"fmt"
	"slices"

	"ulpine/trainer"
)

// Memory is what running a plan needs, in bytes, as computed from shapes.
type Memory struct {
	Run      trainer.Memory // of the run that needs most
	Arm      string         // its arm
	Training uint64         // of the whole program at its peak, before the verdicts
	Report   uint64         // and when it draws the report
}

// What no shape tells, as measured: the program itself, its text and the store's
// writer included; a finding of diagnostics in memory; the figures of a report.
const (
	program       = 26 << 20
	finding       = 400
	reportBase    = 64 << 20
	reportOfAnArm = 4 << 20
)

// Memory estimates the peak of a plan with so many runs at a time. While a worker
// builds the network of its next run that of the one before still waits to be
// collected; verdicts and report hold the losses and findings of all runs.
func (p *Plan) Memory(workers int) Memory {
	var m Memory
	see := func(a *Arm, t trainer.Training, task *Task) {
		of := trainer.MemoryOf(p.Network, &a.Arithmetic, t, trainer.Diagnostics(p.Diagnostics), task.Sizes())
		if of.Own() > m.Run.Own() {
			m.Run, m.Arm = of, a.Name
		}
	}
	for _, a := range slices.Concat(p.Arms, p.Controls) {
		see(&a, a.Training, &p.Task)
	}
	data := m.Run.Data
	if p.Pretrain != nil {
		see(p.Baseline(), p.Pretrain.Training, &p.Pretrain.Task)
		data += trainer.MemoryOf(p.Network, &p.Baseline().Arithmetic, p.Pretrain.Training, trainer.Diagnostics{}, p.Pretrain.Task.Sizes()).Data
	}
	workers = max(1, min(workers, p.Runs()))
	open := 1 // copies of the data
	if p.Task.PerReplicate {
		open = min(workers, p.Replicates.Count)
	}
	study := uint64(p.Runs()) * p.recordBytes()
	m.Training = program + uint64(open)*data + max(2*uint64(workers)*m.Run.Own(), m.Run.Own()+study)
	m.Report = reportBase + reportOfAnArm*uint64(len(p.Arms)) + study
	return m
}

// recordBytes is what verdicts and report hold of a run: losses, and findings at each
// point in each epoch.
func (p *Plan) recordBytes() uint64 {
	bytes := 8 * trainer.Describe(p.Network, nil, p.Training, p.Task.Sizes()).Steps
	if p.Diagnostics.Every > 0 {
		points := 2 // input, loss.gradient
		for i := range p.Network.Layers {
			points += len(p.Network.PointsOf(i))
		}
		bytes += p.Training.Epochs * points * finding
	}
	return uint64(bytes)
}

// MemoryText is one line on the memory of a run, and of the program with so many runs
// at a time.
func MemoryText(p *Plan, workers int) string {
	m := p.Memory(workers)
	r := m.Run
	plural := "s"
	if workers <= 1 {
		plural = ""
	}
	twin := ""
	if r.Twin > 0 {
		twin = fmt.Sprintf(", the binary64 network of the diagnostics %s", sizeText(r.Twin))
	}
	return fmt.Sprintf("memory of a run at most %s (%s): parameters and states %s, activations %s, layers and packed operands %s%s, losses and recorded weights %s; data %s; in all about %s on %d worker%s, %s for the report",
		sizeText(r.Own()), oneLine(m.Arm), sizeText(r.Parameters), sizeText(r.Activations), sizeText(r.Layers+r.Panels), twin,
		sizeText(r.Curves), sizeText(r.Data), sizeText(m.Training), max(1, workers), plural, sizeText(max(m.Training, m.Report)))
}

// sizeText writes a number of bytes with two digits or three.
func sizeText(n uint64) string {
	switch x := float64(n); {
	case x >= 1e9:
		return fmt.Sprintf("%.3g GB", x/1e9)
	case x >= 1e6:
		return fmt.Sprintf("%.3g MB", x/1e6)
	default:
		return fmt.Sprintf("%.3g kB", x/1e3)
	}
}
