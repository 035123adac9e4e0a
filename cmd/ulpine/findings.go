package main

import (
	"fmt"
	"io"
	"math"
	"text/tabwriter"

	"ulpine/results"
)

// layerFindings sums a run's findings over its epochs for one layer.
type layerFindings struct {
	name            string
	worst           float64 // least signal to noise of a stored point, decibels
	point           string  // where
	sums, updates   [2]float64
	excess, planned float64
	cosine          float64 // least of all steps and parameters looked at
}

// showFindings prints how much of values, sums, updates and gradients each layer
// kept, where the run was looked at.
func showFindings(w io.Writer, f *results.Findings) {
	if f == nil || len(f.Points)+len(f.Gradients) == 0 {
		return
	}
	fmt.Fprintln(w, "\nwhat arithmetic kept, in the steps looked at (samples, all epochs):")
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintln(t, "layer\tleast signal to noise\tat\tsums kept\tupdates kept\tupdate bias\tleast gradient cosine")
	for _, l := range gather(f) {
		fmt.Fprintf(t, "%s\t%s\t%s\t%s\t%s\t%s\t%s\n", l.name, decibels(l.worst), l.point,
			kept(l.sums[0]/l.sums[1]), kept(l.updates[0]/l.updates[1]), kept(l.excess/l.planned), kept(l.cosine))
	}
	t.Flush()
	fmt.Fprintln(w, "signal to noise: powers of values and of their rounding errors; kept: 1 is all, 0 nothing;\n"+
		"update bias: mean excess over the mean intended size; cosine: to the gradient in binary64, same masters, same batch")
}

// decibels spells a ratio of powers.
func decibels(x float64) string {
	switch {
	case math.IsInf(x, 1):
		return "exact"
	case math.IsNaN(x):
		return "-"
	}
	return fmt.Sprintf("%.1f dB", x)
}

// kept spells a share or a cosine.
func kept(x float64) string {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return "-"
	}
	return fmt.Sprintf("%.4f", x)
}

// gather sums findings layer by layer, input and loss first.
func gather(f *results.Findings) []*layerFindings {
	last := -1
	for _, p := range f.Points {
		last = max(last, p.Layer)
	}
	for _, g := range f.Gradients {
		last = max(last, g.Layer)
	}
	all := make([]*layerFindings, last+2)
	for i := range all {
		all[i] = &layerFindings{name: fmt.Sprint(i), worst: math.NaN(), cosine: math.NaN()}
	}
	all[0].name = "input, loss"
	gatherPoints(all, f.Points)
	for _, s := range f.Sums {
		l := all[s.Layer+1]
		l.sums[0], l.sums[1] = l.sums[0]+s.Cross, l.sums[1]+s.Squares
	}
	for _, u := range f.Updates {
		l := all[u.Layer+1]
		l.updates[0], l.updates[1] = l.updates[0]+u.Cross, l.updates[1]+u.Squares
		l.excess, l.planned = l.excess+u.Excess, l.planned+u.Intended
	}
	for _, g := range f.Gradients {
		if l := all[g.Layer+1]; !(g.Cosine >= l.cosine) && !math.IsNaN(g.Cosine) {
			l.cosine = g.Cosine
		}
	}
	return all
}

// gatherPoints finds the noisiest point of every layer.
func gatherPoints(all []*layerFindings, points []results.PointFinding) {
	type place struct {
		layer int
		point string
	}
	var order []place
	powers := map[place][2]float64{}
	for i := range points {
		p := &points[i]
		at := place{p.Layer, p.Point}
		before, known := powers[at]
		if !known {
			order = append(order, at)
		}
		powers[at] = [2]float64{before[0] + p.Signal, before[1] + p.Noise}
		if p.Layer >= 0 {
			all[p.Layer+1].name = fmt.Sprintf("%d %s", p.Layer+1, p.Name)
		}
	}
	for _, at := range order {
		l := all[at.layer+1]
		if x := results.Decibels(powers[at][0], powers[at][1]); !(x >= l.worst) && !math.IsNaN(x) {
			l.worst, l.point = x, at.point
		}
	}
}
