package cost

import (
	"fmt"
	"slices"
)

// EnergyTable is what operations and bits cost, in picojoules. The JSON names
// are those of an energy file.
type EnergyTable struct {
	Name       string         `json:"name"`
	Date       string         `json:"date"` // of the figures: year, year-month or year-month-day
	Source     string         `json:"source"`
	Process    string         `json:"process"` // "45 nm, 0.9 V"
	Operations []OperationRow `json:"operation"`
	Caches     []CacheRow     `json:"cache"`
	Formats    []Format       `json:"format,omitempty"` // names of the rows that are not common ones
	Memory     float64        `json:"memory_per_64_bits"`
	Random     float64        `json:"random_bit"` // drawing one and adding it below the last place
	Reuse      float64        `json:"uses_per_read"`
	Notes      []string       `json:"notes,omitempty"` // doubts, printed under every table
}

// OperationRow is the energy of one operation of a format, both operands of it.
// A zero energy means that the table lacks it.
type OperationRow struct {
	Format   string  `json:"format"`
	Multiply float64 `json:"multiply,omitempty"`
	Add      float64 `json:"add,omitempty"`
	Source   string  `json:"source,omitempty"`
}

// CacheRow is the energy of reading 64 bits from a cache of a size.
type CacheRow struct {
	Bytes     uint64  `json:"bytes"`
	Per64Bits float64 `json:"per_64_bits"`
	Source    string  `json:"source,omitempty"`
}

// DefaultEnergy is the table of Horowitz, Computing's energy problem (and what
// we can do about it), ISSCC 2014, for 45 nm at 0.9 V, figures as below: int32
// and fp32 as quoted in a peer-reviewed table (PMC8934428, table 3), others as
// quoted elsewhere or from memory, each row saying so.
func DefaultEnergy() EnergyTable {
	const quoted, memory = "quoted second hand", "from memory"
	return EnergyTable{
		Name: "horowitz-2014", Date: "2014-02", Process: "45 nm, 0.9 V",
		Source: "Horowitz, ISSCC 2014; int32 and fp32 as in PMC8934428 table 3, the rest second hand or from memory",
		Operations: []OperationRow{
			{"int8", 0.2, 0.03, quoted},
			{"int16", 0, 0.05, memory},
			{"int32", 3.1, 0.1, "PMC8934428 table 3"},
			{"fp16", 1.1, 0.4, quoted},
			{"fp32", 3.7, 0.9, "PMC8934428 table 3"},
		},
		Caches: []CacheRow{
			{8 << 10, 10, quoted},
			{32 << 10, 20, memory},
			{1 << 20, 100, memory},
		},
		Memory: 1950,
		// Two bits' worth of a 32-bit integer adder at 0.1 pJ: one to draw a bit
		// from a shift register, one to add it. An assumption.
		Random: 2 * 0.1 / 32,
		Reuse:  8,
		Notes: []string{
			"main memory is the middle of a published range of 1300 to 2600 pJ for 64 bits (from memory): a third less or more",
			"a random bit is assumed to cost two bits of a 32-bit integer adder, one to draw it from a shift register and one to add it; a generator in software costs far more",
			"an operand read from the nearest cache is assumed to serve 8 multiply-adds (registers of 8 by 8)",
			"copies of the table disagree: 640 pJ for main memory is for 32 bits, and some call the multiplication a multiply-add",
		},
	}
}

// Validate says what is wrong with the table: every faulty field, why, and what
// to write instead. FieldErrors takes the error apart.
func (t *EnergyTable) Validate() error {
	var e fieldErrors
	identity(t.Name, t.Date, t.Source, &e)
	if t.Process == "" {
		e.add("process", "the figures belong to no process", `state technology and voltage: "45 nm, 0.9 V"`)
	}
	ownFormats(t.Formats, &e)
	t.operations(&e)
	t.caches(&e)
	e.notNegative("memory_per_64_bits", t.Memory, "picojoules for 64 bits from main memory")
	e.notNegative("random_bit", t.Random, "picojoules for drawing and adding one random bit")
	if !(t.Reuse >= 1) || t.Reuse > 1e9 {
		e.add("uses_per_read", fmt.Sprintf("%v multiply-adds for one read of an operand", t.Reuse), "give 1 or more")
	}
	return e.err()
}

func (t *EnergyTable) operations(e *fieldErrors) {
	multiply, add := false, false
	seen := map[string]bool{}
	for i, r := range t.Operations {
		at := fmt.Sprintf("operation[%d]", i+1)
		f, ok := find(r.Format, t.Formats)
		switch {
		case !ok:
			e.add(at+".format", fmt.Sprintf("%q is no known format", r.Format), nameHint)
		case seen[f.Name]:
			e.add(at+".format", fmt.Sprintf("%s is listed twice", f.Name), "keep one row")
		case f.Family == Logarithmic:
			e.add(at+".format", f.Name+" is logarithmic", "list the integers: such a format multiplies with their adder")
		}
		seen[f.Name] = true
		e.notNegative(at+".multiply", r.Multiply, "picojoules, or leave it out")
		e.notNegative(at+".add", r.Add, "picojoules, or leave it out")
		if r.Multiply == 0 && r.Add == 0 {
			e.add(at, fmt.Sprintf("%q has neither a multiplication nor an addition", r.Format), "give at least one, in picojoules")
		}
		multiply, add = multiply || r.Multiply > 0, add || r.Add > 0
	}
	if !multiply || !add {
		e.add("operation", "the table has no multiplication or no addition to extrapolate from", "give at least the row of fp32")
	}
}

func (t *EnergyTable) caches(e *fieldErrors) {
	if len(t.Caches) == 0 {
		e.add("cache", "the table has no cache", "give at least one size")
	}
	for i, r := range t.Caches {
		at := fmt.Sprintf("cache[%d]", i+1)
		if r.Bytes == 0 {
			e.add(at+".bytes", "a cache of no bytes", "give its size")
		}
		if i > 0 && r.Bytes <= t.Caches[i-1].Bytes {
			e.add(at+".bytes", fmt.Sprintf("%d bytes after %d", r.Bytes, t.Caches[i-1].Bytes), "list sizes in rising order, each once")
		}
		e.notNegative(at+".per_64_bits", r.Per64Bits, "picojoules for reading 64 bits")
	}
}

// near and far are the energies of a bit in the smallest and largest cache, dram
// that of a bit of main memory.
func (t *EnergyTable) near() float64 { return t.Caches[0].Per64Bits / 64 }
func (t *EnergyTable) far() float64  { return t.Caches[len(t.Caches)-1].Per64Bits / 64 }
func (t *EnergyTable) dram() float64 { return t.Memory / 64 }

// charge is the energy of one operation.
type charge struct {
	pj           float64
	extrapolated string // the rule, if the table has no row for it
}

// The rules of extrapolation, as printed.
const (
	ruleMultiply = "multiplications: energy in proportion to the product of the operands' significand widths, on straight lines between listed rows"
	ruleAdd      = "additions: energy in proportion to the width of the significand (integers: all bits), on straight lines between listed rows"
	ruleLog      = "logarithmic formats multiply with an integer adder of their width"
	ruleDivide   = "a division or square root as 6 multiplications"
	ruleRandom   = "random bits at an assumed energy"
	ruleExact    = "exact sums in an integer adder as wide as all their places"
	ruleScale    = "block scales added as exponents, integers of their width, once a pair of blocks"
)

// sample is a listed energy at a size that the rule takes it to follow.
type sample struct{ size, pj float64 }

// multiply is the energy of one multiplication of values of a and b.
func (t *EnergyTable) multiply(a, b Format) charge {
	if a.Family == Logarithmic && b.Family == Logarithmic {
		return charge{t.add(Fixed("", max(a.Bits, b.Bits))).pj, ruleLog}
	}
	family := Float
	if a.Family == Integer && b.Family == Integer {
		family = Integer
	}
	size := float64(a.significand()) * float64(b.significand())
	samples, exact := t.samples(family, func(r OperationRow, f Format) (float64, float64, bool) {
		p := float64(f.significand())
		return p * p, r.Multiply, a.sameArithmetic(f) && b.sameArithmetic(f)
	})
	if exact != nil {
		return *exact
	}
	return charge{between(samples, size), ruleMultiply}
}

// add is the energy of one addition in a format.
func (t *EnergyTable) add(a Format) charge {
	family := Float
	if a.Family == Integer {
		family = Integer
	}
	samples, exact := t.samples(family, func(r OperationRow, f Format) (float64, float64, bool) {
		return float64(f.significand()), r.Add, a.sameArithmetic(f)
	})
	if exact != nil {
		return *exact
	}
	return charge{between(samples, float64(a.significand())), ruleAdd}
}

// sameArithmetic reports whether decoded values of two formats need the same
// circuit: block scales are handled apart from it.
func (f Format) sameArithmetic(g Format) bool {
	return f.Family == g.Family && f.Exponent == g.Exponent && f.Fraction == g.Fraction && f.Bits == g.Bits
}

// samples are the listed rows of a family by rising size, or the row that needs
// no rule. A table without rows of the family lends those of the others.
func (t *EnergyTable) samples(family Family, read func(OperationRow, Format) (size, pj float64, exact bool)) ([]sample, *charge) {
	var own, others []sample
	for _, r := range t.Operations {
		f, ok := find(r.Format, t.Formats)
		if !ok {
			continue
		}
		size, pj, exact := read(r, f)
		switch {
		case pj == 0:
		case exact:
			return nil, &charge{pj: pj}
		case f.Family == family:
			own = append(own, sample{size, pj})
		default:
			others = append(others, sample{size, pj})
		}
	}
	if len(own) == 0 {
		own = others
	}
	slices.SortStableFunc(own, func(a, b sample) int {
		if a.size < b.size {
			return -1
		}
		if a.size > b.size {
			return 1
		}
		return 0
	})
	return own, nil
}

// between reads a size off the straight lines through the samples, and off a
// line through the origin below the first and above the last.
func between(samples []sample, size float64) float64 {
	first, last := samples[0], samples[len(samples)-1]
	if size <= first.size {
		return first.pj * (size / first.size)
	}
	for i := 1; i < len(samples); i++ {
		lo, hi := samples[i-1], samples[i]
		if size <= hi.size {
			return lo.pj + float64((hi.pj-lo.pj)*((size-lo.size)/(hi.size-lo.size)))
		}
	}
	return last.pj * (size / last.size)
}
