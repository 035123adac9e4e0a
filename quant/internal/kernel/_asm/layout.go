package main

import (
	"fmt"
	"go/token"
	"go/types"
	"strings"

	"github.com/mmcloughlin/avo/gotypes"
)

// field is one field of a structure that assembly reads, in the order of the
// structure's declaration in package kernel.
type field struct {
	name string
	size int
}

const (
	word   = 8
	slice  = 24
	vector = 64
)

// tileFields are the fields of kernel.Tile.
var tileFields = []field{
	{"K", word},
	{"Groups", word},
	{"A", slice},
	{"AStride", word},
	{"B", slice},
	{"R", slice},
	{"V", slice},
	{"In", slice},
	{"InRow", word},
	{"Out", slice},
	{"OutRow", word},
	{"Final", slice},
	{"FinalRow", word},
	{"Flags", slice},
	{"C", word},
	{"TermR", slice},
	{"TermV", slice},
	{"Events", slice},
}

// constantFields are the fields of kernel.Constants: vectors of equal lanes.
var constantFields = []field{
	{"ExponentMask", vector},
	{"SignMask", vector},
	{"MagnitudeMask", vector},
	{"Least", vector},
	{"Grow", vector},
	{"Rescale", vector},
	{"SumLeast", vector},
	{"SumGrow", vector},
	{"SumSplit", vector},
	{"Scale", vector},
	{"Unscale", vector},
	{"Keep", vector},
	{"RandomMask", vector},
	{"RandomShift", vector},
	{"RandomHalf", vector},
	{"Fraction", vector},
	{"Implicit", vector},
	{"PreShift", vector},
	{"BaseShift", vector},
	{"WholeShift", vector},
	{"Quantum", vector},
	{"Limit", vector},
	{"Ones", vector},
	{"TermKeep", vector},
	{"TermMask", vector},
	{"TermShift", vector},
	{"TermHalf", vector},
	{"TermLimit", vector},
	{"Max", vector},
	{"Over", vector},
	{"Infinite", vector},
	{"SumMax", vector},
	{"SumOver", vector},
	{"SumInfinite", vector},
	{"Infinity", vector},
	{"OddMask", vector},
}

// philoxFields are the fields of kernel.philoxArgs.
var philoxFields = []field{
	{"Dst", slice},
	{"Blocks", word},
	{"Width", word},
	{"Lane", word},
	{"First", word},
	{"Step", word},
	{"Site", word},
	{"Phase", word},
	{"Key0", word},
	{"Key1", word},
}

// offset is the distance of a field from the start of its structure.
func offset(fields []field, name string) int {
	at := 0
	for _, f := range fields {
		if f.name == name {
			return at
		}
		at += f.size
	}
	panic("no field " + name)
}

// signature is func(t *kernel.Tile[element]). avo prints a type's name as it
// stands, so the instantiation is part of the name and no package is loaded.
func signature(double bool) *gotypes.Signature {
	name := "Tile[float32]"
	if double {
		name = "Tile[float64]"
	}
	return pointerSignature(name)
}

// pointerSignature is func(t *name).
func pointerSignature(name string) *gotypes.Signature {
	named := types.NewNamed(types.NewTypeName(token.NoPos, nil, name, nil), types.NewStruct(nil, nil), nil)
	params := types.NewTuple(types.NewVar(token.NoPos, nil, "t", types.NewPointer(named)))
	return gotypes.NewSignature(nil, types.NewSignatureType(nil, nil, nil, params, nil, false))
}

// declared is a stand-in for package kernel, with the types that signatures name.
var declared = func() *types.Package {
	p := types.NewPackage("kernel", "kernel")
	name := types.NewTypeName(token.NoPos, p, "Constants", nil)
	types.NewNamed(name, types.NewStruct(nil, nil), nil)
	p.Scope().Insert(name)
	return p
}()

// assertions renders constants that fail to compile as soon as a field of the
// Go structure is not where the assembly reads it.
func assertions() string {
	var b strings.Builder
	b.WriteString("// The assembly reads fields by offset; a moved field fails to compile here.\nconst (\n")
	for _, s := range []struct {
		kind   string
		fields []field
	}{{"Tile[float32]", tileFields}, {"Constants", constantFields}, {"philoxArgs", philoxFields}} {
		for _, f := range s.fields {
			at := offset(s.fields, f.name)
			fmt.Fprintf(&b, "\t_ = uint(unsafe.Offsetof(%s{}.%s)-%d) + uint(%d-unsafe.Offsetof(%s{}.%s))\n",
				s.kind, f.name, at, at, s.kind, f.name)
		}
	}
	b.WriteString(")\n")
	return b.String()
}
