package cost

import (
	"regexp"
	"strconv"
	"strings"
)

// mxBlock and mxScale are the block of the OCP Microscaling specification 1.0:
// 32 elements under one E8M0 scale.
const (
	mxBlock = 32
	mxScale = 8
)

// named are the formats that tables call by a name of their own. Names are
// compared without case, hyphens, underscores and spaces.
var named = map[string]Format{
	"fp16":     Plain("fp16", 5, 10),
	"binary16": Plain("fp16", 5, 10),
	"bf16":     Plain("bf16", 8, 7),
	"bfloat16": Plain("bf16", 8, 7),
	"fp32":     FP32,
	"binary32": FP32,
	"fp64":     Plain("fp64", 11, 52),
	"binary64": Plain("fp64", 11, 52),
	"fp8e4m3":  Plain("E4M3", 4, 3),
	"fp8e5m2":  Plain("E5M2", 5, 2),
	"mxfp8":    Plain("", 4, 3).WithBlocks("mxfp8-e4m3", mxBlock, mxScale),
	"mxfp8e4m3": Plain("", 4, 3).WithBlocks("mxfp8-e4m3", mxBlock,
		mxScale),
	"mxfp8e5m2": Plain("", 5, 2).WithBlocks("mxfp8-e5m2", mxBlock, mxScale),
	"mxfp6e3m2": Plain("", 3, 2).WithBlocks("mxfp6-e3m2", mxBlock, mxScale),
	"mxfp6e2m3": Plain("", 2, 3).WithBlocks("mxfp6-e2m3", mxBlock, mxScale),
	"mxfp4":     Plain("", 2, 1).WithBlocks("mxfp4-e2m1", mxBlock, mxScale),
	"mxfp4e2m1": Plain("", 2, 1).WithBlocks("mxfp4-e2m1", mxBlock, mxScale),
	"mxint8":    Fixed("", 8).WithBlocks("mxint8", mxBlock, mxScale),
}

var (
	splitName   = regexp.MustCompile(`^e([0-9]{1,2})m([0-9]{1,2})$`)
	integerName = regexp.MustCompile(`^u?int([0-9]{1,3})$`)
	nameJoints  = strings.NewReplacer("-", "", "_", "", " ", "")
)

// nameHint tells which names FormatNamed knows.
const nameHint = "use fp16, bf16, fp32, fp64, EeMm, intN, an MX name such as mxfp8-e4m3, or define the name under format"

// FormatNamed returns the format that a row of a machine's or an energy table
// means by a name: fp16, bf16, fp32, fp64 and their long names, any split EeMm,
// intN, and the OCP MX formats.
func FormatNamed(name string) (Format, bool) {
	key := nameJoints.Replace(strings.ToLower(strings.TrimSpace(name)))
	if f, ok := named[key]; ok {
		return f, true
	}
	if m := splitName.FindStringSubmatch(key); m != nil {
		exponent, _ := strconv.Atoi(m[1])
		fraction, _ := strconv.Atoi(m[2])
		return Plain(strings.ToUpper(key), exponent, fraction), true
	}
	if m := integerName.FindStringSubmatch(key); m != nil {
		if bits, _ := strconv.Atoi(m[1]); bits > 0 {
			return Fixed(key, bits), true
		}
	}
	return Format{}, false
}

// find looks a name up among a table's own formats, then among the known ones.
func find(name string, own []Format) (Format, bool) {
	for _, f := range own {
		if strings.EqualFold(f.Name, strings.TrimSpace(name)) {
			return f, true
		}
	}
	return FormatNamed(name)
}
