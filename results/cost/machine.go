package cost

import (
	"fmt"
	"math/big"
	"time"
)

// Machine is a table of what a machine can do at its peak. The JSON names are
// those of a machine file.
type Machine struct {
	Name      string   `json:"name"`
	Date      string   `json:"date"` // of the figures: year-month or year-month-day
	Source    string   `json:"source"`
	Bandwidth float64  `json:"bandwidth"` // bytes a second between memory and cache
	Cache     uint64   `json:"cache"`     // bytes, for the tiled model
	Rates     []Rate   `json:"rate"`
	Formats   []Format `json:"format,omitempty"` // names of the rows that are not common ones
	// Elementwise is the number of operations a second of pools and updates; 0: a
	// multiply-add of their formats each.
	Elementwise float64 `json:"elementwise,omitempty"`
	// RandomBits is the number of random bits drawn a second, at the same time as
	// the arithmetic; 0: drawing takes no time.
	RandomBits float64 `json:"random_bits,omitempty"`
	// Absent is what becomes of formats without a row: "hold" (the default),
	// computed in a row that holds them; or "width", as "hold" and faster by the
	// ratio of widths, for hardware that does not exist yet.
	Absent string `json:"absent,omitempty"`
}

// The values of Machine.Absent.
const (
	AbsentHold  = "hold"
	AbsentWidth = "width"
)

// Rate is the peak rate of one pair of formats.
type Rate struct {
	Operands     string  `json:"operands"`      // of both operands: "fp16"
	Sum          string  `json:"sum,omitempty"` // empty: as the operands
	MultiplyAdds float64 `json:"multiply_adds"` // a second; half of the operations a second of a data sheet
	Source       string  `json:"source,omitempty"`
}

// Validate says what is wrong with the table: every faulty field, why, and what
// to write instead. FieldErrors takes the error apart.
func (m *Machine) Validate() error {
	var e fieldErrors
	identity(m.Name, m.Date, m.Source, &e)
	e.positive("bandwidth", m.Bandwidth, "the bytes a second between memory and cache")
	if m.Cache < 16 || m.Cache > 1<<40 {
		e.add("cache", fmt.Sprintf("a cache of %d bytes", m.Cache), "give 16 bytes to a terabyte; registers count where there is no cache")
	}
	e.notNegative("elementwise", m.Elementwise, "operations a second, or leave it out")
	e.notNegative("random_bits", m.RandomBits, "random bits a second, or leave it out")
	if m.Absent != "" && m.Absent != AbsentHold && m.Absent != AbsentWidth {
		e.add("absent", fmt.Sprintf("%q is no rule for formats without a row", m.Absent), `use "hold" or "width"`)
	}
	ownFormats(m.Formats, &e)
	m.rates(&e)
	return e.err()
}

func (m *Machine) rates(e *fieldErrors) {
	if len(m.Rates) == 0 {
		e.add("rate", "the table has no rate", "give at least the one of fp32")
	}
	seen := map[[2]string]bool{}
	floats := false
	for i, r := range m.Rates {
		at := fmt.Sprintf("rate[%d]", i+1)
		operands, sum, ok := m.formats(r)
		if _, found := find(r.Operands, m.Formats); !found {
			e.add(at+".operands", fmt.Sprintf("%q is no known format", r.Operands), nameHint)
		}
		if _, found := find(r.Sum, m.Formats); !found && r.Sum != "" {
			e.add(at+".sum", fmt.Sprintf("%q is no known format", r.Sum), nameHint)
		}
		e.positive(at+".multiply_adds", r.MultiplyAdds, "the peak multiply-adds a second (two operations each)")
		if !ok {
			continue
		}
		pair := [2]string{operands.Name, sum.Name}
		if seen[pair] {
			e.add(at, fmt.Sprintf("%s with sums in %s is listed twice", operands.Name, sum.Name), "keep one row")
		}
		seen[pair] = true
		floats = floats || FP32.heldBy(operands) && FP32.heldBy(sum)
	}
	if len(m.Rates) > 0 && !floats {
		e.add("rate", "no row holds fp32, with which every arm is compared", "add one, emulated if need be")
	}
}

// formats are the two formats of a row.
func (m *Machine) formats(r Rate) (operands, sum Format, ok bool) {
	operands, ok = find(r.Operands, m.Formats)
	if sum = operands; r.Sum != "" && ok {
		sum, ok = find(r.Sum, m.Formats)
	}
	return operands, sum, ok
}

// ValuesPerSecond is the exact number of values of a format that the memory
// delivers a second.
func (m *Machine) ValuesPerSecond(f Format) *big.Rat {
	bits := new(big.Rat).SetFloat64(m.Bandwidth)
	bits.Mul(bits, big.NewRat(8, 1))
	return bits.Quo(bits, f.Width())
}

// found is a rate as looked up.
type found struct {
	rate         float64 // multiply-adds a second
	extrapolated string  // how it was found, if the table has no row for it
}

// rate looks up the rate of multiply-adds of operands a and b summed in a format.
func (m *Machine) rate(a, b, sum Format) found {
	best, widest := -1, -1
	var bestFormats, widestFormats [2]Format
	for i, r := range m.Rates {
		operands, s, ok := m.formats(r)
		if !ok {
			continue
		}
		if a.same(operands) && b.same(operands) && sum.same(s) {
			return found{rate: r.MultiplyAdds}
		}
		pair := [2]Format{operands, s}
		if a.heldBy(operands) && b.heldBy(operands) && sum.heldBy(s) &&
			(best < 0 || r.MultiplyAdds > m.Rates[best].MultiplyAdds) {
			best, bestFormats = i, pair
		}
		if widest < 0 || operands.Bits > widestFormats[0].Bits {
			widest, widestFormats = i, pair
		}
	}
	if best >= 0 {
		return m.held(m.Rates[best], bestFormats, a, b, sum)
	}
	ratio := float64(widestFormats[0].Bits) / float64(max(a.Bits, b.Bits))
	return found{
		m.Rates[widest].MultiplyAdds * min(ratio, 1),
		fmt.Sprintf("%s: no row holds them; the rate of %s by its width over theirs",
			pairName(a, b, sum), widestFormats[0].Name),
	}
}

// held is the rate of formats that a row holds without being its own.
func (m *Machine) held(r Rate, row [2]Format, a, b, sum Format) found {
	rule := fmt.Sprintf("%s: computed as %s with sums in %s, the fastest row that holds them",
		pairName(a, b, sum), row[0].Name, row[1].Name)
	if m.Absent != AbsentWidth {
		return found{r.MultiplyAdds, rule}
	}
	ratio := float64(row[0].Bits) / float64(max(a.Bits, b.Bits))
	return found{r.MultiplyAdds * max(ratio, 1), rule + ", its rate by its width over theirs"}
}

// pairName spells a pair of operands and the format of their sums.
func pairName(a, b, sum Format) string {
	operands := a.Name
	if !a.same(b) {
		operands += " x " + b.Name
	}
	return operands + " with sums in " + sum.Name
}

// identity checks what every table must say about itself.
func identity(name, date, source string, e *fieldErrors) {
	if name == "" {
		e.add("name", "the table has no name", "name it: reports quote it")
	}
	if source == "" {
		e.add("source", "the figures have no source", "say where they come from, if only \"measured by me\"")
	}
	for _, layout := range []string{"2006-01-02", "2006-01", "2006"} {
		if _, err := time.Parse(layout, date); err == nil {
			return
		}
	}
	e.add("date", fmt.Sprintf("%q is no date of the figures", date), `write year-month-day, year-month or year: "2026-01"`)
}

func ownFormats(formats []Format, e *fieldErrors) {
	for i := range formats {
		formats[i].check(fmt.Sprintf("format[%d]", i+1), e)
	}
}

// seconds is a count over a rate a second; 0 of nothing, whatever the rate.
func seconds(count, rate float64) float64 {
	if count == 0 {
		return 0
	}
	return count / rate
}
