package elementary

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"path/filepath"
	"strings"
	"testing"
)

// TestNoFusion reads the package's own source: a product must stand alone inside a
// float64() conversion, which forbids fusing it into a later sum; from package
// math only calls that are exact or correctly rounded on every machine.
func TestNoFusion(t *testing.T) {
	files, err := filepath.Glob("*.go")
	if err != nil {
		t.Fatal(err)
	}
	products := 0
	for _, name := range files {
		if strings.HasSuffix(name, "_test.go") {
			continue
		}
		set := token.NewFileSet()
		file, err := parser.ParseFile(set, name, nil, 0)
		if err != nil {
			t.Fatal(err)
		}
		faults, n := fusible(set, file)
		products += n
		for _, f := range faults {
			t.Error(f)
		}
	}
	if products < 50 {
		t.Errorf("only %d products seen: the test is blind", products)
	}
}

// TestNoFusionCanFail: the reader of sources sees what it is there to see.
func TestNoFusionCanFail(t *testing.T) {
	const source = "package p\nimport \"math\"\nfunc f(a, b, c float64) float64 { a *= b; return math.Sin(a) + b*c }\n"
	set := token.NewFileSet()
	file, err := parser.ParseFile(set, "p.go", source, 0)
	if err != nil {
		t.Fatal(err)
	}
	if faults, _ := fusible(set, file); len(faults) != 3 {
		t.Errorf("faults found: %q, want three", faults)
	}
}

// allowed calls of package math.
var allowed = map[string]bool{
	"Abs": true, "Copysign": true, "FMA": true, "Float64bits": true, "Float64frombits": true,
	"Floor": true, "Inf": true, "NaN": true,
}

func fusible(set *token.FileSet, file *ast.File) (faults []string, products int) {
	wrapped := map[ast.Node]bool{}
	fault := func(n ast.Node, what string) {
		faults = append(faults, fmt.Sprintf("%s: %s", set.Position(n.Pos()), what))
	}
	ast.Inspect(file, func(n ast.Node) bool {
		switch n := n.(type) {
		case *ast.CallExpr:
			if f, ok := n.Fun.(*ast.Ident); ok && (f.Name == "float64" || f.Name == "NewInt") && len(n.Args) == 1 {
				wrapped[n.Args[0]] = true
			}
			if f, ok := n.Fun.(*ast.SelectorExpr); ok {
				if x, ok := f.X.(*ast.Ident); ok && x.Name == "math" && !allowed[f.Sel.Name] {
					fault(n, "math."+f.Sel.Name+" may differ between machines")
				}
				if f.Sel.Name == "NewInt" {
					wrapped[n.Args[0]] = true // an integer product
				}
			}
		case *ast.BinaryExpr:
			if n.Op == token.MUL {
				products++
				if !wrapped[n] {
					fault(n, "a product outside float64() may be fused")
				}
			}
		case *ast.AssignStmt:
			if n.Tok == token.MUL_ASSIGN {
				fault(n, "*= may be fused")
			}
		}
		return true
	})
	return faults, products
}
