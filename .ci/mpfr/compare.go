// Command compare holds package quant to GNU MPFR, by way of the program round.c:
// binary16, bfloat16, E5M2 and E4M3 in four rounding modes, over every value of each,
// every midpoint with both its binary32 neighbours, and random numbers; and fused
// multiply-adds of random operands. It exits with 1 where one result differs.
//
//	go run .ci/mpfr/compare.go PATH-OF-ROUND
package main

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"os"
	"os/exec"
	"strconv"

	"ulpine/quant"
	"ulpine/quant/random"
)

// format is a format in MPFR's terms.
type format struct {
	name                     string
	exponent, fraction, bias int
	clamp                    float64 // largest value where results saturate there, else 0
}

// E5M2 is compared with infinities, as IEEE 754 has them; OCP's E4M3 saturates at
// 448, which MPFR cannot know: its largest binade would go on to 480.
var formats = []format{
	{"binary16", 5, 10, 15, 0},
	{"bfloat16", 8, 7, 127, 0},
	{"E5M2(overflow=infinity)", 5, 2, 15, 0},
	{"E4M3", 4, 3, 7, 448},
}

var modes = []struct {
	letter string
	mode   quant.Mode
}{{"N", quant.NearestEven}, {"Z", quant.TowardZero}, {"U", quant.Up}, {"D", quant.Down}}

// emax is MPFR's largest exponent: one more than that of the largest value, whose
// exponent field is all ones in E4M3 and one less elsewhere.
func (f format) emax() int {
	top := 1<<f.exponent - 2
	if f.clamp != 0 {
		top++
	}
	return top - f.bias + 1
}

func main() {
	if len(os.Args) != 2 {
		fail("usage: compare PATH-OF-ROUND")
	}
	numbers := numbers()
	fmt.Printf("%d numbers, %d formats, %d modes\n", len(numbers), len(formats), len(modes))
	differ := 0
	for _, f := range formats {
		triples := triples(f)
		for _, m := range modes {
			differ += f.compare("round", m.letter, m.mode, numbers)
			differ += f.compare("fma", m.letter, m.mode, triples)
		}
	}
	if differ > 0 {
		fail(fmt.Sprintf("%d results differ from GNU MPFR", differ))
	}
	fmt.Println("all agree with GNU MPFR")
}

func fail(words string) {
	fmt.Fprintln(os.Stderr, "compare:", words)
	os.Exit(1)
}

func parse(f format) quant.Format {
	q, err := quant.ParseFormat(f.name)
	if err != nil {
		fail(err.Error())
	}
	return q
}

// numbers are the operands of round, both signs of each.
func numbers() []float64 {
	all := []float64{0, math.Inf(1), math.NaN()}
	for _, f := range formats {
		q := parse(f)
		coded := q.(interface{ Decode(code uint64) float64 })
		for code := range uint64(1) << (q.Limits().Bits - 1) {
			v := coded.Decode(code)
			if math.IsNaN(v) || math.IsInf(v, 0) {
				continue
			}
			b := q.Bracket(quant.Exactly(v))
			middle := float32(v + (b.Away-b.Toward)/2)
			all = append(all, v, float64(middle),
				float64(math.Nextafter32(middle, 0)), float64(math.Nextafter32(middle, float32(math.Inf(1)))))
		}
	}
	d := quant.Draws{Seed: random.Derive(1, random.Data)}
	for n := range uint64(150_000) {
		w := d.Words(n)
		for _, bits := range w { // any binary32 number
			if x := float64(math.Float32frombits(bits &^ (1 << 31))); x == x {
				all = append(all, x)
			}
		}
		// All 53 bits, magnitudes 2^-40 to 2^24.
		all = append(all, math.Float64frombits(uint64(1023-40+w[0]%64)<<52|uint64(w[1])<<20|uint64(w[2])>>12))
	}
	for _, x := range all {
		all = append(all, -x)
	}
	return all
}

// triples are operands of fma, three after each other: codes of the format, the
// third often near the product.
func triples(f format) []float64 {
	q := parse(f)
	coded := q.(interface{ Decode(code uint64) float64 })
	d := quant.Draws{Seed: random.Derive(2, random.Data)}
	bits := q.Limits().Bits
	var all []float64
	for n := range uint64(60_000) {
		w := d.Words(n)
		a, b := coded.Decode(uint64(w[0])>>(32-bits)), coded.Decode(uint64(w[1])>>(32-bits))
		c := coded.Decode(uint64(w[2]) >> (32 - bits))
		if w[3]&1 != 0 {
			p := quant.Point{Format: q}
			c, _ = p.Round(quant.ExactProduct(a, -b), 0)
		}
		all = append(all, a, b, c)
	}
	return all
}

// compare runs one operation in one mode both ways and returns how many results
// differ.
func (f format) compare(operation, letter string, mode quant.Mode, operands []float64) int {
	want := f.mpfr(operation, letter, operands)
	p := quant.Point{Format: parse(f), Rounding: quant.Rounding{Mode: mode}}
	arity := len(operands) / len(want)
	differ := 0
	for i, w := range want {
		x := operands[i*arity:][:arity]
		exact := quant.Exactly(x[0])
		if operation == "fma" {
			exact = quant.ExactProduct(x[0], x[1]).Add(quant.Exactly(x[2]))
		}
		got, _ := p.Round(exact, 0)
		// An exact zero of opposite terms is +0 here in every mode, -0 in IEEE's down.
		zero := operation == "fma" && exact.IsZero() && got == 0 && w == 0
		if math.Float64bits(got) != math.Float64bits(w) && !(got != got && w != w) && !zero {
			if differ < 3 {
				fmt.Printf("%s %s %s of %x: %v, MPFR has %v\n", f.name, operation, letter, x, got, w)
			}
			differ++
		}
	}
	fmt.Printf("%-24s %-5s %s %9d results, %d differ\n", f.name, operation, letter, len(want), differ)
	return differ
}

// mpfr has the C program compute the results.
func (f format) mpfr(operation, letter string, operands []float64) []float64 {
	clamp := strconv.FormatFloat(f.clamp, 'g', -1, 64)
	cmd := exec.Command(os.Args[1], operation, strconv.Itoa(f.fraction+1), strconv.Itoa(2-f.bias-f.fraction), strconv.Itoa(f.emax()), letter, clamp)
	in := make([]byte, 0, 8*len(operands))
	for _, x := range operands {
		in = binary.NativeEndian.AppendUint64(in, math.Float64bits(x))
	}
	cmd.Stdin, cmd.Stderr = bytes.NewReader(in), os.Stderr
	out, err := cmd.Output()
	if err != nil {
		fail(err.Error())
	}
	count := len(operands)
	if operation == "fma" {
		count /= 3
	}
	if len(out) != 8*count {
		fail(fmt.Sprintf("%d bytes for %d results", len(out), count))
	}
	results := make([]float64, count)
	for i := range results {
		results[i] = math.Float64frombits(binary.NativeEndian.Uint64(out[8*i:]))
	}
	return results
}
