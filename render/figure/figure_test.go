package figure

import (
	"flag"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"penwright/protocol"
	"penwright/protocol/layout"
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

// plan makes a plan from a line such as "block 5, pen within block 4"; the last unit
// receives the treatment, and in three-level nests so does the one above it.
func plan(units string) *layout.Plan {
	p := protocol.Protocol{Factors: []protocol.Factor{{Name: "treatment_a"}, {Name: "treatment_b"}}}
	list := strings.Split(units, ", ")
	cells := 1
	for _, s := range list {
		w := strings.Fields(s)
		u := protocol.Unit{Name: w[0]}
		switch {
		case len(w) > 2 && w[1] == "within":
			u.Within = w[2]
			n, _ := strconv.Atoi(w[3])
			u.Count = []int{n}
			cells = n
		case len(w) > 2:
			u.Crosses = w[2:]
			cells = 4
		default:
			n, _ := strconv.Atoi(w[1])
			u.Count = []int{n}
			if len(list) == 1 {
				cells = n / 2
			}
		}
		p.Units = append(p.Units, u)
	}
	last := len(p.Units) - 1
	p.Factors = p.Factors[1:]
	for i := range cells {
		p.Factors[0].Levels = append(p.Factors[0].Levels, fmt.Sprint("t", i+1))
	}
	p.Units[last].Receives = []string{"treatment_b"}
	if strings.Contains(units, "paddock") {
		p.Factors = append(p.Factors, protocol.Factor{Name: "treatment_a", Levels: []string{"x", "y", "z"}})
		p.Units[last-1].Receives = []string{"treatment_a"}
	}
	got, list2 := layout.New(&p)
	if list2.HasErrors() {
		panic(fmt.Sprint("no plan of ", units, ": ", list2))
	}
	return got
}

// planned is the map of a plan with t treatments, moved on by one from block to block.
func planned(units string, t int) Map {
	p := plan(units)
	m := FromPlan(p, func(_, i int) Look {
		k := (i + i/t) % t
		if t == 12 {
			return Look{Label: fmt.Sprintf("%c%d", 'A'+i/4%3, i%4+1), Treatment: i % 12, Value: none}
		}
		return Look{Label: fmt.Sprint("T", k+1), Treatment: k, Value: none}
	})
	for k := range t {
		name := fmt.Sprint("T", k+1)
		if t == 12 {
			name = fmt.Sprintf("%c%d", 'A'+k/4, k%4+1)
		}
		m.Treatments = append(m.Treatments, name)
	}
	return m
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
	differences := Differences{Response: "Difference in daily gain (g/d)", Interval: "simultaneous 95 % limits"}
	for i := range 4 {
		for k := range i {
			d := 14*float64(i-k) + 9*noise(10*i+k)
			differences.Rows = append(differences.Rows, Difference{A: fmt.Sprint(20*i, " g/kg"), B: fmt.Sprint(20*k, " g/kg"), Value: d, Low: d - 22, High: d + 22})
		}
	}
	byName := crossed(4, 3)
	byName.X, byName.Bar = nil, 0
	blocks := planned("block 5, pen within block 4", 4)
	blocks.Boxes[1].Cells[2].Excluded = true
	shaded := planned("block 5, pen within block 4", 4)
	shaded.Shade = "Residual of daily gain, g"
	for i := range shaded.Boxes {
		for k := range shaded.Boxes[i].Cells {
			shaded.Boxes[i].Cells[k].Value = 24 * noise(60+7*i+k)
		}
	}
	shaded.Boxes[1].Cells[2].Excluded, shaded.Boxes[1].Cells[2].Value = true, none
	split := FromPlan(plan("block 4, paddock within block 3, pen within paddock 4"), func(u, i int) Look {
		if u == 1 {
			return Look{Label: []string{"rotational", "set stocked", "strip grazed"}[(i+i/3)%3], Value: none}
		}
		k := (i*3 + i/4) % 4
		return Look{Label: []string{"none", "barley", "beans", "both"}[k], Treatment: k, Value: none}
	})
	split.Treatments = []string{"none", "barley", "beans", "both"}
	power := Power{X: "Pens per treatment", Target: 0.8, Chosen: 6}
	for k := range 3 {
		c := PowerCurve{Label: fmt.Sprintf("difference of %d g/d", 30+15*k)}
		for n := 3; n <= 14; n++ {
			c.Points = append(c.Points, PowerPoint{N: float64(n), Power: 1 - math.Exp(-float64(n*n*(k+1)*(k+1))/90)})
		}
		power.Curves = append(power.Curves, c)
	}
	var fitted Fitted
	fitted.X, fitted.Y, fitted.Zero = "Fitted daily gain, g", "Residual of daily gain, g", true
	var quantiles Quantiles
	quantiles.Y, quantiles.Slope, quantiles.Envelope = "Studentized residual", 1, "the middle 95 % of 999 normal samples"
	for i := range 20 {
		z := math.Sqrt2 * math.Erfinv(2*(float64(i+1)-0.375)/20.25-1)
		half := 0.35 + 0.22*z*z
		unit := fmt.Sprintf("pen %d", (i*7)%20+1)
		quantiles.Points = append(quantiles.Points, Quantile{
			Unit: unit, Expected: z, Value: z + 0.2*noise(i) + 0.5*float64(i/19), Low: z - half, High: z + half, Named: i == 19,
		})
		fitted.Points = append(fitted.Points, XY{Unit: unit, X: 600 + 130*(noise(i*3)+1)/2, Y: 15 * (z + 0.2*noise(i)), Named: i == 19 || i == 0})
	}
	spread := Spread{Response: "aphids per leaf", Intercept: -0.1, Slope: 0.86}
	for i := range 8 {
		m := 2 * math.Pow(1.9, float64(i))
		spread.Points = append(spread.Points, Scale{Label: varietyName(i), Mean: m, SD: math.Pow(10, -0.1+0.86*math.Log10(m)+0.08*noise(i))})
	}
	return []struct {
		name string
		drawing
	}{
		{"map-blocks", blocks},
		{"map-planned", FromPlan(plan("block 5, pen within block 4"), nil)},
		{"map-residuals", shaded},
		{"map-square", planned("cow 4, period 4, sample crosses cow period", 4)},
		{"map-squares", planned("square 2, cow within square 4, period within square 4, sample crosses cow period", 4)},
		{"map-split", split},
		{"map-strip", planned("block 3, strip within block 3, lane within block 4, plot crosses strip lane", 12)},
		{"flow", Flow{Unit: "pen", Stages: []string{"planned", "allotted", "observed", "analysed"}, Rows: []FlowRow{
			{Label: "0 g/kg", Counts: []int{5, 5, 5, 5}},
			{Label: "20 g/kg", Counts: []int{5, 5, 5, 4}, Reasons: []string{"", "", "feeder failure"}},
			{Label: "40 g/kg", Counts: []int{5, 5, 4, 4}, Reasons: []string{"", "humane endpoint reached, whole pen removed", ""}},
			{Label: "60 g/kg", Counts: []int{5, 5, 5, 5}},
		}}},
		{"power", power},
		{"fitted", fitted},
		{"quantiles", quantiles},
		{"spread", spread},
		{"points", yeast},
		{"points-many", trial(24, 4, varietyName)},
		{"residuals", residual},
		{"means", meansOf(trial(5, 4, varietyName))},
		{"means-many", meansOf(trial(30, 4, varietyName))},
		{"means-dose", dose},
		{"differences", differences},
		{"interaction", crossed(4, 3)},
		{"interaction-names", byName},
		{"interaction-many", crossed(5, 12)},
	}
}

// crowds are maps of hundreds of units, too large for golden files.
func crowds() []Map {
	wideShade := planned("block 8, plot within block 60", 60)
	wideShade.Shade = "Residual of yield, t/ha"
	for b := range wideShade.Boxes {
		for i := range wideShade.Boxes[b].Cells {
			wideShade.Boxes[b].Cells[i].Value = 0.4*noise(b*60+i) + 0.3*math.Sin(float64(i)/9)
		}
	}
	return []Map{
		wideShade,
		planned("replicate 4, block within replicate 6, plot within block 6", 36),
		planned("block 8, plot within block 60", 60),
		planned("block 20, plot within block 120", 120),
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

func BenchmarkGallery(b *testing.B) {
	gallery := gallery()
	for b.Loop() {
		for _, g := range gallery {
			g.Draw()
		}
	}
}

// The worst that is promised: 60 treatments with names of 120 letters.
func BenchmarkSixty(b *testing.B) {
	for _, d := range kinds(60, 3, nameKinds[3].of) {
		b.Run(strings.TrimPrefix(fmt.Sprintf("%T", d), "figure."), func(b *testing.B) {
			for b.Loop() {
				d.Draw()
			}
		})
	}
}
