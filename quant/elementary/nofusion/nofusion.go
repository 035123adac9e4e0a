// Package nofusion reads Go sources for what makes results differ between
// machines: products that a compiler may fuse into a sum, and functions of package
// math that are not correctly rounded everywhere. Tests of packages that compute
// measured values call it on their own files.
package nofusion

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
)

// exactCalls of package math are exact or correctly rounded on every machine.
var exactCalls = map[string]bool{
	"Abs": true, "Copysign": true, "FMA": true, "Float32bits": true, "Float64bits": true,
	"Float32frombits": true, "Float64frombits": true, "Floor": true, "Inf": true, "NaN": true,
	"IsNaN": true, "IsInf": true, "Signbit": true, "Sqrt": true,
}

// conversions stand between a product and a sum; the integer ones say that the
// product is one of integers. NewInt is math/big's.
var conversions = map[string]bool{
	"float64": true, "float32": true, "int": true, "int64": true, "uint64": true, "NewInt": true,
}

// Check returns what it finds wrong in the files, one line each, and the number
// of products it has looked at: a product must stand alone in a conversion, which
// the language says prevents fusion, unless it is a constant's declaration. The
// test is one of syntax: integer products want int() around them too.
func Check(files ...string) (faults []string, products int, err error) {
	for _, name := range files {
		f, n, err := CheckSource(name, nil)
		if err != nil {
			return nil, 0, err
		}
		faults = append(faults, f...)
		products += n
	}
	return faults, products, nil
}

// CheckSource is Check for one file; source nil reads it from disk.
func CheckSource(name string, source []byte) (faults []string, products int, err error) {
	var src any
	if source != nil {
		src = source
	}
	c := checker{set: token.NewFileSet(), safe: map[ast.Node]bool{}}
	file, err := parser.ParseFile(c.set, name, src, 0)
	if err != nil {
		return nil, 0, fmt.Errorf("read the source for fused products: %w", err)
	}
	ast.Inspect(file, c.visit)
	return c.faults, c.products, nil
}

type checker struct {
	set      *token.FileSet
	safe     map[ast.Node]bool // products that stand alone in a conversion
	faults   []string
	products int
}

func (c *checker) fault(n ast.Node, what string) {
	c.faults = append(c.faults, fmt.Sprintf("%s: %s", c.set.Position(n.Pos()), what))
}

func (c *checker) visit(n ast.Node) bool {
	switch n := n.(type) {
	case *ast.GenDecl:
		return n.Tok != token.CONST
	case *ast.CallExpr:
		c.call(n)
	case *ast.BinaryExpr:
		if n.Op == token.MUL {
			c.products++
			if !c.safe[n] {
				c.fault(n, "a product outside a conversion may be fused")
			}
		}
	case *ast.AssignStmt:
		if n.Tok == token.MUL_ASSIGN {
			c.fault(n, "*= may be fused")
		}
	}
	return true
}

func (c *checker) call(n *ast.CallExpr) {
	name := ""
	switch f := n.Fun.(type) {
	case *ast.Ident:
		name = f.Name
	case *ast.SelectorExpr:
		name = f.Sel.Name
		if x, ok := f.X.(*ast.Ident); ok && x.Name == "math" && !exactCalls[name] {
			c.fault(n, "math."+name+" may differ between machines")
		}
	}
	if conversions[name] && len(n.Args) == 1 {
		c.safe[n.Args[0]] = true
	}
}
