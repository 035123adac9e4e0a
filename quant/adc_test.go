package quant

import (
	"math"
	"strings"
	"testing"
)

// TestADC: names, ends and refusals of converters; their values and roundings are held
// to exact rationals with those of the other families.
func TestADC(t *testing.T) {
	f, err := ParseFormat("adc5(to=85,from=-40)")
	if err != nil {
		t.Fatal(err)
	}
	if again, err := ParseFormat(f.String()); err != nil || again != f || f.String() != "ADC5(from=-40,to=85)" {
		t.Fatalf("%s is read back as %v, %v", f, again, err)
	}
	point := Point{Format: f}
	if l := f.Limits(); l.Bits != 5 || l.Lowest != -40 || l.Max != 81.09375 || !l.Binary32 {
		t.Errorf("%+v", l)
	}
	if sym, _ := NewADC(12, -3.3, 3.3); sym.at(2048) != 0 || sym.at(0) != -float64(float32(3.3)) {
		t.Errorf("the middle of a symmetric range is %v", sym.at(2048))
	}
	if got, event := point.Round(Exactly(math.Inf(1)), 0); got != 81.09375 || event != Saturated {
		t.Errorf("infinity becomes %v, %v", got, event)
	}
	for word, part := range map[string]string{
		"ADC12": "from is missing", "ADC0(from=0,to=1)": "1 to 16", "ADC17(from=0,to=1)": "1 to 16", "ADC4(from=1,to=1)": "not below",
		"ADC4(from=0,to=1,by=2)": "from and to", "ADC4(from=0,to=x)": "not a number", "ADC16(from=1e9,to=1000001000)": "too narrow",
	} {
		if _, err := ParseFormat(word); err == nil || !strings.Contains(err.Error(), part) {
			t.Errorf("%s: %v", word, err)
		}
	}
}
