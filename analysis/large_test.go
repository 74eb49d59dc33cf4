package analysis

import (
	"fmt"
	"math/rand/v2"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/folder"
)

// largeMixed are trials of 10 000 rows that need a mixed model.
func largeMixed() map[string]fstest.MapFS {
	r := rand.New(rand.NewPCG(1, 2))
	const head = "protocol = 1\n[trial]\ncode = \"L\"\ntitle = \"Large\"\nobjective = \"Large.\"\n[randomization]\nmethod = \"made up\"\n"
	const tail = "[[response]]\nname = \"y\"\nkind = \"continuous\"\n"
	out := map[string]fstest.MapFS{}
	add := func(name, protocol, data string) {
		out[name] = fstest.MapFS{"protocol.toml": &fstest.MapFile{Data: []byte(head + protocol)}, "data.csv": &fstest.MapFile{Data: []byte(data)}}
	}
	names := func(prefix string, n int) string {
		var l []string
		for i := range n {
			l = append(l, fmt.Sprintf("%q", fmt.Sprint(prefix, i)))
		}
		return strings.Join(l, ", ")
	}
	var d strings.Builder
	d.WriteString("pen,week,diet,y\n")
	for i := range 1000 {
		e := r.NormFloat64()
		for t := range 10 {
			e = 0.6*e + 0.8*r.NormFloat64()
			if r.Float64() < 0.97 {
				fmt.Fprintf(&d, "%d,%d,d%d,%.3f\n", i+1, t, i%6, 10+e)
			}
		}
	}
	add("autoregressive", "[[factor]]\nname = \"diet\"\nlevels = ["+names("d", 6)+"]\n[[unit]]\nname = \"pen\"\ncount = 1000\nreceives = [\"diet\"]\n"+
		"[[repeated]]\nname = \"week\"\non = \"pen\"\nat = [0, 1, 2, 3, 4, 5, 6, 7, 8, 9]\ncorrelation = \"autoregressive\"\n"+tail+"repeated = \"week\"\n[data]\nfile = \"data.csv\"\n", d.String())

	d.Reset()
	d.WriteString("site,row,column,line,y\n")
	effect := make([]float64, 2100)
	for i := range effect {
		effect[i] = r.NormFloat64()
	}
	for s := range 10 { // 10 fields of 100 rows and 100 columns, of which a tenth is sown
		for row := range 100 {
			for k := range 10 {
				column := (row + 10*k) % 100
				fmt.Fprintf(&d, "%d,%d,%d,l%d,%.3f\n", s+1, row+1, column+1, r.IntN(20), effect[100*s+row]+effect[1000+100*s+column]+r.NormFloat64())
			}
		}
	}
	add("crossed", "[[factor]]\nname = \"line\"\nlevels = ["+names("l", 20)+"]\n[[unit]]\nname = \"site\"\ncount = 10\n[[unit]]\nname = \"row\"\nwithin = \"site\"\ncount = 100\nrandom = true\n"+
		"[[unit]]\nname = \"column\"\nwithin = \"site\"\ncount = 100\nrandom = true\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"line\"]\n"+tail+"[data]\nfile = \"data.csv\"\n", d.String())

	d.Reset()
	d.WriteString("block,plot,subplot,a,b,y\n")
	for b := range 200 {
		for p := range 5 {
			e := r.NormFloat64()
			for s := range 10 {
				if r.Float64() < 0.97 {
					fmt.Fprintf(&d, "%d,%d,%d,a%d,b%d,%.3f\n", b+1, p+1, s+1, (b+p)%5, (p+s)%10, e+r.NormFloat64())
				}
			}
		}
	}
	add("split plot", "[[factor]]\nname = \"a\"\nlevels = ["+names("a", 5)+"]\n[[factor]]\nname = \"b\"\nlevels = ["+names("b", 10)+"]\n[[unit]]\nname = \"block\"\ncount = 200\n[[unit]]\nname = \"plot\"\nwithin = \"block\"\ncount = 5\nreceives = [\"a\"]\n"+
		"[[unit]]\nname = \"subplot\"\nwithin = \"plot\"\ncount = 10\nreceives = [\"b\"]\n"+tail+"[data]\nfile = \"data.csv\"\n", d.String())
	return out
}

// BenchmarkLargeMixed measures the whole way from files to results.
func BenchmarkLargeMixed(b *testing.B) {
	for name, files := range largeMixed() {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				tr, list := trial.Open(folder.FromFS(files))
				if list.HasErrors() {
					b.Fatal(list[0].Message)
				}
				rs, found := Run(tr, result.Program{Name: "test"}, nil)
				if found.HasErrors() {
					b.Fatal(found[0].Message)
				}
				if rs.Responses[0].Model.Method != "reml" {
					b.Fatal(rs.Responses[0].Model.Method)
				}
			}
		})
	}
}
