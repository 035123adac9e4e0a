package cost

import (
	"fmt"
	"strings"
)

// answer is the sentence above the tables.
func answer(r *Result) string {
	if len(r.Arms) == 0 {
		return fmt.Sprintf("No arms to compare: with everything in FP32 a training step of %d examples moves %s.",
			r.Batch, bytesOf(r.Reference.Once.Step.Total.Bits))
	}
	best := &r.Arms[0]
	for i := range r.Arms {
		now, least := &r.Arms[i].Once.Step.Total, &best.Once.Step.Total
		if now.Bits < least.Bits || now.Bits == least.Bits && now.Energy.Total < least.Energy.Total {
			best = &r.Arms[i]
		}
	}
	step, inference := &best.Once.Step.Total, &best.Once.Inference.Total
	if step.Bits >= r.Reference.Once.Step.Total.Bits {
		return fmt.Sprintf("No arm moves fewer bytes than FP32 in a training step; %s comes nearest with %s of FP32's.",
			best.Name, fraction(step.Against.Bits))
	}
	return fmt.Sprintf("%s moves the fewest bytes: %s of FP32's in a training step, %s in an inference. "+
		"On %s its step would run %s, bound by %s, and take %s of the energy, by model.",
		best.Name, fraction(step.Against.Bits), fraction(inference.Against.Bits),
		r.Machine.Name, fast(step.Against.Speedup), step.Time.Binds, fraction(step.Against.Energy))
}

// fast says a speed-up in words.
func fast(x float64) string {
	if s := significant(x); s != "1.00" {
		return s + " times as fast as in FP32"
	}
	return "no faster than in FP32"
}

// assumptions are what the figures rest on, in words.
func (e *estimator) assumptions() []string {
	m, t := &e.in.Machine, &e.in.Energy
	all := []string{
		fmt.Sprintf("%d parameters trained by %s in batches of %d; an inference is of %s",
			e.in.Network.Parameters(), e.in.Optimizer.Name, e.batch, plural(e.inference, "example")),
		"once: each tensor is read or written once a phase, the least a cold cache allows",
		fmt.Sprintf("tiled: products run in blocks through a cache of %s, by the cheapest of three loops; nothing stays in it from one phase of a layer to the next",
			bytesOf(8*m.Cache)),
		"layers are not fused, values are packed without gaps, formats are converted on the way at no cost",
		"one reading of a convolution's patches costs one reading of its input",
		"training memory holds the inputs that the backward phases need, and the largest pair of neighbouring gradients",
		"a phase takes the longest of arithmetic at its peak rate and traffic at full bandwidth: times are lower bounds",
		"rounding, and the order of a sum apart from its number of additions, take no time of their own",
	}
	all = append(all, e.machineWords()...)
	all = append(all, fmt.Sprintf("energy: %s, %s", tableName(t.Name, t.Source, t.Date), t.Process),
		"every moved bit is charged once at the largest listed cache and once at main memory")
	if e.in.Optimizer.Divisions > 0 {
		all = append(all, fmt.Sprintf("a division or square root counts as %d multiplications", DivisionAsMultiplies))
	}
	return append(all, t.Notes...)
}

func (e *estimator) machineWords() []string {
	m := &e.in.Machine
	rates := make([]string, len(m.Rates))
	for i, r := range m.Rates {
		rates[i] = r.Operands
		if r.Sum != "" {
			rates[i] += " into " + r.Sum
		}
		rates[i] += " " + scaled(r.MultiplyAdds, 1, counts) + "/s"
	}
	words := []string{
		"machine: " + tableName(m.Name, m.Source, m.Date),
		fmt.Sprintf("%s: memory %s/s; multiply-adds at %s", m.Name, scaled(m.Bandwidth, 1, byteUnits), strings.Join(rates, ", ")),
	}
	if m.Absent == AbsentWidth {
		words = append(words, "formats without a row run at the rate of a row that holds them, faster by the ratio of widths: hardware that may not exist")
	} else {
		words = append(words, "formats without a row run in the fastest row that holds them")
	}
	if m.RandomBits > 0 {
		return append(words, fmt.Sprintf("random bits are drawn at %s/s beside the arithmetic", scaled(m.RandomBits, 1, counts)))
	}
	return append(words, "drawing random bits takes no time; their energy is charged")
}

// cautions are what a reader must not be misled about.
func cautions() []string {
	return []string{
		"These are figures of a model, not measurements. Energy and rates come from dated tables that you can replace by your own.",
		"They say what an arithmetic would cost, not whether training survives it: read them beside the verdicts.",
		"Control, leakage, idle time and communication are not charged; in real machines they can outweigh everything listed.",
	}
}

// warnings are doubts about this network on this machine.
func (e *estimator) warnings(ref *Bill) (all []string) {
	if bits := ref.Memory.Training.Bits; bits <= 8*e.in.Machine.Cache {
		all = append(all, fmt.Sprintf("everything that training keeps in FP32, %s, fits the cache of %s: a real run would fetch far less from memory than both reuse models count",
			bytesOf(bits), bytesOf(8*e.in.Machine.Cache)))
	}
	for i := range e.in.Network.Layers {
		l := &e.in.Network.Layers[i]
		if l.Work.Forward == 0 || l.additive() {
			continue
		}
		if _, _, _, ok := l.product(); !ok {
			all = append(all, fmt.Sprintf("layer %d (%s) is no single product of weights and activations: in both reuse models each of its tensors moves once a phase",
				i, l.Name))
		}
	}
	return all
}

func plural(n uint64, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}
