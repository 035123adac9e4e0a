// Command _asm writes the assembly of package kernel: the tiles of products of
// matrices and the elementwise loops, for AVX2 and for AVX-512.
//
//	go run . ..
//
// run here (go generate in the package does) rewrites ../*_amd64.s, the Go
// declarations beside them and the tables of tiles. The output depends on nothing
// but this module and its go.sum.
//
// A mode (modes.go) is a list of operations a term (steps.go); a target (tuning.go)
// is an instruction set with the shapes of its tiles; tile.go writes the loop around
// the list, schedule.go overlaps the terms, lanes.go hides register width, element
// type and operand order.
//
// # Pitfalls of avo met here
//
//   - The register allocator knows 32 vector registers. An AVX2 function that needs
//     more than 16 gets Y16 and up without complaint; the Go assembler then refuses
//     some instructions and silently encodes others for AVX-512. compile rejects it.
//   - A failed allocation names neither function nor pressure, so every function is
//     compiled in a context of its own.
//   - operand.Imm picks the narrowest unsigned constant; ADDQ of 128 to 255 then has
//     no form. Write operand.U32.
//   - Old VEX instructions are methods of three arguments, those with AVX-512 forms
//     are variadic: they have different function types.
//   - Referring to a package's types makes avo load and compile that package, which
//     does not compile before its assembly exists. The argument type here is made up
//     with go/types; assertions about offsets are written to Go instead.
//   - Conversions that narrow are two methods: VCVTPD2PSY for YMM sources,
//     VCVTPD2PS for ZMM.
package main

import (
	"errors"
	"fmt"
	"log"
	"os"
	"path/filepath"
	"strings"

	"github.com/mmcloughlin/avo/build"
	"github.com/mmcloughlin/avo/ir"
	"github.com/mmcloughlin/avo/operand"
	"github.com/mmcloughlin/avo/pass"
	"github.com/mmcloughlin/avo/reg"
)

func main() {
	log.SetFlags(0)
	if len(os.Args) != 2 {
		log.Fatal("usage: go run . DIRECTORY")
	}
	if err := generate(os.Args[1]); err != nil {
		log.Fatal(err)
	}
}

// generate writes all files to dir.
func generate(dir string) error {
	var tables table
	for _, t := range targets {
		for _, double := range []bool{false, true} {
			file := ir.NewFile()
			for _, m := range modes {
				if m.double == double {
					if err := tables.add(file, t, m); err != nil {
						return err
					}
				}
			}
			if err := write(filepath.Join(dir, stem(t, double)), file); err != nil {
				return err
			}
		}
	}
	for _, t := range targets {
		if err := generateLoops(dir, t); err != nil {
			return err
		}
	}
	return os.WriteFile(filepath.Join(dir, "tables_amd64.go"), tables.source(), 0o644)
}

// generateLoops writes the loops over slices of a target.
func generateLoops(dir string, t target) error {
	file := ir.NewFile()
	add := func(generate func(*build.Context, string), name string) error {
		c := build.NewContext()
		generate(c, name)
		f, err := compiled(c, t.zmm)
		if err != nil {
			return fmt.Errorf("%s: %w", name, err)
		}
		file.Sections = append(file.Sections, f.Sections...)
		if len(f.Includes) > 0 {
			file.Includes = f.Includes // textflag.h, where a function has data
		}
		return nil
	}
	p := philox{lanes: lanes{zmm: t.zmm}}
	if err := add(p.generate, "philox"+t.name); err != nil {
		return err
	}
	p = philox{lanes: lanes{zmm: t.zmm}, stream: true}
	if err := add(p.generate, "philoxStream"+t.name); err != nil {
		return err
	}
	for _, l := range loops {
		l.zmm = t.zmm
		if err := add(l.generate, l.name+t.name); err != nil {
			return err
		}
	}
	return write(filepath.Join(dir, "loops_"+strings.ToLower(t.name)), file)
}

// fit compiles with the widest spacing and then the most constants in registers, up
// to the shape's, that the registers hold.
func fit(t target, m mode, s shape, vectors int, name string) (*ir.File, error) {
	for kept := min(s.kept, len(m.constants)); kept >= 0; kept-- {
		for spacing := s.spacing; spacing >= 0; spacing-- {
			if f, err := compile(t, m, shape{s.rows, kept, spacing}, vectors, name); err == nil {
				return f, nil
			}
		}
	}
	return nil, fmt.Errorf("%s does not fit the registers", name)
}

// compile generates one function.
func compile(t target, m mode, s shape, vectors int, name string) (*ir.File, error) {
	c := build.NewContext()
	g := &tile{
		lanes: lanes{zmm: t.zmm, double: m.double},
		mode:  m, rows: s.rows, vectors: vectors, spacing: s.spacing,
		inMemory: map[string]bool{}, slots: map[string]operand.Mem{},
	}
	for n, constant := range m.constants {
		g.inMemory[constant] = n >= s.kept
	}
	if !g.generate(c, name) {
		return nil, errors.New("spacing too wide")
	}
	return compiled(c, t.zmm)
}

// compiled allocates the registers of a context's function.
func compiled(c *build.Context, zmm bool) (*ir.File, error) {
	f, err := c.Result()
	if err != nil {
		return nil, err
	}
	if err := pass.Compile.Execute(f); err != nil {
		return nil, err
	}
	if !zmm && beyond15(f) {
		return nil, errors.New("more than 16 vector registers")
	}
	return f, nil
}

// beyond15 reports whether a compiled function uses a vector register that VEX
// instructions cannot name.
func beyond15(f *ir.File) bool {
	for _, fn := range f.Functions() {
		for _, i := range fn.Instructions() {
			for _, r := range i.Registers() {
				p, ok := r.(reg.Physical)
				if ok && p.Kind() == reg.KindVector && p.PhysicalIndex() > 15 {
					return true
				}
			}
		}
	}
	return false
}
