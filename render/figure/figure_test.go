package figure

import (
	"flag"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"testing"

	"penwright/render/doc"
)

var update = flag.Bool("update", false, "rewrite the golden pictures")

// drawing is any of the figures.
type drawing interface {
	Draw() (*doc.Picture, string)
}

var none = math.NaN()

// noise is a fixed sequence that looks random, from -1 to 1.
func noise(i int) float64 {
	x := uint64(i)*0x9e3779b97f4a7c15 + 0x632be59bd9b4e019
	x ^= x >> 31
	x *= 0xbf58476d1ce4e5b9
	x ^= x >> 27
	return float64(x>>11)/float64(1<<52) - 1
}

// trial is an invented trial of g treatments in b blocks.
func trial(g, b int, label func(int) string) Points {
	p := Points{Response: "Daily gain, g", By: "Dried yeast, g/kg", Blocks: "block"}
	for i := range g {
		group := Group{Label: label(i)}
		sum := 0.0
		for k := range b {
			v := 640 + 24*float64(i%7) + 35*noise(k+900) + 18*noise(i*b+k)
			sum += v
			group.Points = append(group.Points, Point{
				Unit: fmt.Sprintf("pen %d", k*g+i+1), Block: fmt.Sprintf("Block %d", k+1), Value: v,
			})
		}
		group.Mean = sum / float64(b)
		p.Groups = append(p.Groups, group)
	}
	return p
}

func doseName(i int) string { return fmt.Sprint(20 * i) }

func varietyName(i int) string {
	names := []string{"Harrow", "Long Acre", "Tollgate winter", "Merrow", "Pale Fen", "Cinder", "Old Barn red", "Staithe"}
	return fmt.Sprintf("%s %d", names[i%len(names)], i+1)
}

func meansOf(p Points) Means {
	m := Means{Response: p.Response, By: p.By, Interval: "95 % confidence intervals"}
	for i, g := range p.Groups {
		m.Means = append(m.Means, Mean{
			Label: g.Label, X: float64(20 * i), Value: g.Mean, Low: g.Mean - 21, High: g.Mean + 21,
			Letters: []string{"a", "ab", "bc", "c"}[i%4],
		})
	}
	return m
}

func crossed(levels, lines int) Interaction {
	n := Interaction{Response: "Yield, t/ha", By: "Nitrogen, kg/ha", Over: "variety", Bar: 0.42, BarLabel: "SED, 45 df"}
	for i := range levels {
		n.Levels = append(n.Levels, fmt.Sprint(30*i))
		n.X = append(n.X, float64(30*i))
	}
	for k := range lines {
		l := Line{Label: varietyName(k)}
		for i := range levels {
			l.Values = append(l.Values, 4+0.8*float64(i)-0.12*float64(i*i)+0.5*noise(k)+0.3*noise(100+k*levels+i))
		}
		n.Lines = append(n.Lines, l)
	}
	return n
}

// gallery holds a picture of each kind as reports show them.
func gallery() []struct {
	name string
	drawing
} {
	yeast := trial(4, 5, doseName)
	yeast.Groups[1].Points[2].Excluded = true
	residual := trial(4, 5, doseName)
	residual.Residual = true
	residual.Response = "Residual of daily gain, g"
	for i := range residual.Groups {
		g := &residual.Groups[i]
		for k := range g.Points {
			g.Points[k].Value -= g.Mean
		}
		g.Mean = none
	}
	dose := meansOf(trial(4, 5, doseName))
	dose.Dose = true
	dose.Trend.Label = "fitted straight line with its 95 % band"
	for i := range 31 {
		x := float64(2 * i)
		y := 641 + 1.1*x
		half := 9 + math.Abs(x-30)*0.3
		dose.Trend.Points = append(dose.Trend.Points, TrendPoint{X: x, Y: y, Low: y - half, High: y + half})
	}
	byName := crossed(4, 3)
	byName.X, byName.Bar = nil, 0
	return []struct {
		name string
		drawing
	}{
		{"points", yeast},
		{"points-many", trial(24, 4, varietyName)},
		{"residuals", residual},
		{"means", meansOf(trial(5, 4, varietyName))},
		{"means-many", meansOf(trial(30, 4, varietyName))},
		{"means-dose", dose},
		{"interaction", crossed(4, 3)},
		{"interaction-names", byName},
		{"interaction-many", crossed(5, 12)},
	}
}

func TestGolden(t *testing.T) {
	for _, g := range gallery() {
		t.Run(g.name, func(t *testing.T) {
			pic, alt := g.Draw()
			got := svg(pic) + "<!-- " + alt + " -->\n"
			file := filepath.Join("testdata", g.name+".svg")
			if *update {
				if err := os.MkdirAll("testdata", 0o777); err != nil {
					t.Fatal(err)
				}
				if err := os.WriteFile(file, []byte(got), 0o666); err != nil {
					t.Fatal(err)
				}
				return
			}
			want, err := os.ReadFile(file)
			if err != nil {
				t.Fatal(err)
			}
			if got != string(want) {
				t.Errorf("the picture differs from %s: look at both, then run with -update", file)
			}
		})
	}
}
