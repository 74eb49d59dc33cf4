package layout

import (
	"go/ast"
	"go/parser"
	"go/token"
	"strings"
	"testing"
)

// The example in the comment of every code brings the code about.
func TestExamplesOfCodes(t *testing.T) {
	file, err := parser.ParseFile(token.NewFileSet(), "codes.go", nil, parser.ParseComments)
	if err != nil {
		t.Fatal(err)
	}
	examples := map[string]string{}
	for _, decl := range file.Decls {
		g, ok := decl.(*ast.GenDecl)
		if !ok || g.Tok != token.CONST {
			continue
		}
		for _, spec := range g.Specs {
			v := spec.(*ast.ValueSpec)
			code := strings.Trim(v.Values[0].(*ast.BasicLit).Value, `"`)
			_, example, ok := strings.Cut(v.Doc.Text(), "Example:\n")
			if !ok {
				t.Errorf("%s has no example", code)
			}
			examples[code] = example
		}
	}
	infos := Codes()
	if len(infos) != len(examples) {
		t.Errorf("%d codes are described, %d declared", len(infos), len(examples))
	}
	for _, info := range infos {
		body := strings.ReplaceAll(examples[info.Code], "\n\t", "\n")
		called := ""
		if strings.HasPrefix(strings.TrimSpace(body), "called") {
			called, body, _ = strings.Cut(strings.TrimSpace(body), "\n")
		}
		_, list := New(load(t, called+"\n"+diets+body))
		found := false
		for _, d := range list {
			found = found || d.Code == info.Code
			if strings.HasSuffix(d.Message, ".") || strings.HasSuffix(d.Hint, ".") || d.Message == "" {
				t.Errorf("message %q, hint %q", d.Message, d.Hint)
			}
		}
		if !found {
			t.Errorf("the example of %s gives %v", info.Code, list)
		}
	}
}
