package main

import (
	"go/parser"
	"go/token"
	"io/fs"
	"path"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// lattice is a statement of policy: who may import whom of our packages, in the order
// in which data flow. A name ending in "+" stands for the package and all that it may
// import itself. Relaxing it to make a build pass is a change of design.
var lattice = map[string]string{
	"protocol/diag":             "",
	"protocol/factor":           "",
	"analysis/result":           "",
	"analysis/num":              "",
	"analysis/solve":            "",
	"render/face":               "",
	"templates":                 "",
	"protocol/internal/tomlpos": "protocol/diag",
	"protocol/folder":           "protocol/diag",
	"protocol/sheet":            "protocol/diag",
	"protocol":                  "protocol/diag protocol/internal/tomlpos",
	"protocol/layout":           "protocol protocol/factor protocol/diag",
	"protocol/welfare":          "protocol protocol/layout protocol/diag",
	"protocol/allot":            "protocol protocol/layout protocol/factor protocol/folder protocol/sheet protocol/diag",
	"protocol/seal":             "protocol/allot protocol/allot+",

	"analysis/dist":     "analysis/solve",
	"analysis/strata":   "protocol/factor analysis/dist",
	"analysis/linear":   "protocol/factor analysis/dist",
	"analysis/mixed":    "protocol/factor analysis/dist analysis/solve analysis/strata analysis/linear",
	"analysis/residual": "protocol/factor analysis/dist analysis/solve analysis/strata analysis/linear",
	"analysis/power":    "protocol/factor analysis/dist analysis/solve analysis/strata analysis/linear",
	"analysis/compare":  "analysis/dist analysis/solve",
	"analysis/dataset":  "protocol protocol/layout protocol/allot protocol/folder protocol/sheet protocol/diag",
	"analysis/trial":    "analysis/dataset+ analysis/dataset protocol/seal protocol/welfare",
	"analysis/prose":    "analysis/result analysis/num analysis/trial analysis/trial+",
	"analysis/sound":    "analysis/trial analysis/trial+ analysis/prose analysis/result protocol/factor analysis/linear analysis/power",
	"analysis": "analysis/sound analysis/trial analysis/trial+ analysis/prose analysis/result analysis/num protocol/factor analysis/dist analysis/strata " +
		"analysis/linear analysis/mixed analysis/compare analysis/residual analysis/power",

	"render/doc":           "protocol/diag",
	"render/doc/sample":    "render/doc protocol/diag", // for the tests of the writers
	"render/compose":       "render/doc protocol/diag",
	"render/table":         "analysis/result analysis/num analysis/prose analysis/prose+ render/doc render/face",
	"render/figure":        "analysis/result analysis/num analysis/prose analysis/prose+ render/doc render/face",
	"render/page/pagetest": "render/doc protocol/diag",
	"render/page":          "render/doc render/face protocol/diag",
	"render/pdf":           "render/page render/doc render/face protocol/diag",
	"render/html":          "render/doc render/face",
	"render/md":            "render/doc render/face",
	"render/term":          "render/doc render/face",
	"render/grid":          "render/doc render/face", // what writers without pages of their own must measure
	"render/tex":           "render/grid render/doc render/face protocol/diag",
	"render/raster":        "render/doc render/face",
	"render/docx":          "render/grid render/raster render/doc render/face",
	"render": "render/doc render/compose render/table render/figure render/page render/pdf render/html render/md render/tex render/docx render/term render/face " +
		"analysis/trial analysis/trial+ analysis/result analysis/prose analysis/num templates",

	"cmd/penwright": "*",
}

func TestImportsFollowTheLattice(t *testing.T) {
	root := filepath.Join("..", "..")
	fset := token.NewFileSet()
	err := filepath.WalkDir(root, func(file string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		if d.IsDir() && (strings.HasPrefix(d.Name(), ".") && file != root || d.Name() == "testdata" || d.Name() == "node_modules") && d.Name() != ".." {
			return filepath.SkipDir
		}
		if d.IsDir() || !strings.HasSuffix(file, ".go") || strings.HasSuffix(file, "_test.go") {
			return nil
		}
		rel, err := filepath.Rel(root, file)
		if err != nil {
			return err
		}
		pkg := path.Dir(filepath.ToSlash(rel))
		f, err := parser.ParseFile(fset, file, nil, parser.ImportsOnly)
		if err != nil {
			return err
		}
		allowed, known := may(pkg)
		if !known {
			t.Errorf("%s: package %s has no place in the lattice", rel, pkg)
			return nil
		}
		for _, im := range f.Imports {
			p, err := strconv.Unquote(im.Path.Value)
			if err != nil {
				return err
			}
			ours, ok := strings.CutPrefix(p, "penwright/")
			if ok && !slices.Contains(allowed, ours) && !slices.Contains(allowed, "*") {
				t.Errorf("%s imports %s, which the lattice does not allow", rel, ours)
			}
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}

// may lists the packages that pkg may import.
func may(pkg string) ([]string, bool) {
	row, ok := lattice[pkg]
	if !ok {
		return nil, false
	}
	var out []string
	for _, x := range strings.Fields(row) {
		if of, all := strings.CutSuffix(x, "+"); all {
			more, _ := may(of)
			out = append(out, more...)
		} else {
			out = append(out, x)
		}
	}
	return out, true
}

// The lattice has no cycles: no package is reached from itself.
func TestLatticeHasNoCycle(t *testing.T) {
	var visit func(pkg string, trail []string)
	visit = func(pkg string, trail []string) {
		if slices.Contains(trail, pkg) {
			t.Fatalf("cycle: %v → %s", trail, pkg)
		}
		next, _ := may(pkg)
		for _, p := range next {
			if p != "*" {
				visit(p, append(trail, pkg))
			}
		}
	}
	for pkg := range lattice {
		visit(pkg, nil)
	}
}
