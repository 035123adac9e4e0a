package cost

import "strconv"

// unit is a step of a scale of units.
type unit struct {
	size float64
	name string
}

// The scales, from large to small; decimal prefixes.
var (
	byteUnits = []unit{{1e12, " TB"}, {1e9, " GB"}, {1e6, " MB"}, {1e3, " kB"}, {1, " B"}}
	timeUnits = []unit{{1, " s"}, {1e-3, " ms"}, {1e-6, " µs"}, {1e-9, " ns"}, {1e-12, " ps"}}
	jouleUnit = []unit{{1, " J"}, {1e-3, " mJ"}, {1e-6, " µJ"}, {1e-9, " nJ"}, {1e-12, " pJ"}}
	counts    = []unit{{1e12, " T"}, {1e9, " G"}, {1e6, " M"}, {1e3, " k"}, {1, ""}}
)

// scaled writes x in units of scale in the largest unit that leaves at least one.
func scaled(x, scale float64, units []unit) string {
	x *= scale
	if x == 0 {
		return "0"
	}
	for _, u := range units {
		// 999.5 of a unit is printed as 1000 of it, so as 1 of the next.
		if x >= 0.9995*u.size {
			return significant(x/u.size) + u.name
		}
	}
	last := units[len(units)-1]
	return significant(x/last.size) + last.name
}

// significant writes a number with three digits, more before the point.
func significant(x float64) string {
	switch {
	case x >= 99.95:
		return strconv.FormatFloat(x, 'f', 0, 64)
	case x >= 9.995:
		return strconv.FormatFloat(x, 'f', 1, 64)
	case x >= 0.0995 || x == 0:
		return strconv.FormatFloat(x, 'f', 2, 64)
	}
	return strconv.FormatFloat(x, 'g', 2, 64)
}

// fraction writes a part of FP32's figure.
func fraction(x float64) string { return strconv.FormatFloat(x, 'f', 3, 64) }

// width writes a number of bits a value.
func width(bits float64) string { return strconv.FormatFloat(bits, 'f', 2, 64) }

func bytesOf(bits uint64) string { return scaled(float64(bits)/8, 1, byteUnits) }
