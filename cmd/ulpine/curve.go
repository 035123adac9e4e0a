package main

import (
	"fmt"
	"io"
	"math"
	"strings"
)

// drawCurve draws the loss per step on a logarithmic axis: each column spans a
// range of steps and is filled from the least to the greatest loss in it, with
// half-height cells.
func drawCurve(w io.Writer, losses []float64, width, height int) {
	low, high := math.Inf(1), math.Inf(-1)
	for _, x := range losses {
		if x > 0 && !math.IsInf(x, 0) {
			low, high = min(low, x), max(high, x)
		}
	}
	if low > high {
		fmt.Fprintln(w, "no finite loss to draw")
		return
	}
	if high < low*1.01 {
		low, high = low/1.1, high*1.1
	}
	width = min(width, len(losses))
	cells := make([][]bool, 2*height)
	for i := range cells {
		cells[i] = make([]bool, width)
	}
	row := func(x float64) int {
		t := math.Log(x/low) / math.Log(high/low)
		return min(2*height-1, max(0, int(t*float64(2*height))))
	}
	broken := make([]bool, width)
	for c := range width {
		from, to := c*len(losses)/width, (c+1)*len(losses)/width
		least, most := math.Inf(1), math.Inf(-1)
		for _, x := range losses[from:to] {
			if !(x > 0) || math.IsInf(x, 0) {
				broken[c] = true
				continue
			}
			least, most = min(least, x), max(most, x)
		}
		if least <= most {
			for y := row(least); y <= row(most); y++ {
				cells[y][c] = true
			}
		}
	}
	for y := height - 1; y >= 0; y-- {
		label := ""
		switch y {
		case height - 1:
			label = fmt.Sprintf("%.3g", high)
		case 0:
			label = fmt.Sprintf("%.3g", low)
		case height / 2:
			label = fmt.Sprintf("%.3g", low*math.Pow(high/low, (float64(y)+0.5)/float64(height)))
		}
		var line strings.Builder
		for c := range width {
			line.WriteString([]string{" ", "▄", "▀", "█"}[bit(cells[2*y][c])|bit(cells[2*y+1][c])<<1])
		}
		fmt.Fprintf(w, "%9s │%s\n", label, strings.TrimRight(line.String(), " "))
	}
	var axis strings.Builder
	for c := range width {
		if broken[c] {
			axis.WriteString("×") // a loss that is not finite
		} else {
			axis.WriteString("─")
		}
	}
	fmt.Fprintf(w, "%9s └%s\n", "loss", axis.String())
	last := fmt.Sprint(len(losses))
	fmt.Fprintf(w, "%9s  step 1%s%s\n", "", strings.Repeat(" ", max(1, width-6-len(last))), last)
}

func bit(b bool) int {
	if b {
		return 1
	}
	return 0
}
