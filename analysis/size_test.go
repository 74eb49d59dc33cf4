package analysis

import (
	"math"
	"math/rand/v2"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"github.com/rogpeppe/go-internal/txtar"

	"penwright/analysis/dist"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
)

// four is a protocol of one factor of four diets on what units says.
func four(units, size string) string { return diets(4, units, size, "") }

func diets(n int, units, size, response string) string {
	var levels []string
	for i := range n {
		levels = append(levels, string(rune('a'+i)))
	}
	return `protocol = 1
[trial]
code = "HM-1"
title = "Diets"
objective = "Which diet?"
[[factor]]
name = "diet"
levels = ["` + strings.Join(levels, `", "`) + `"]
` + units + `
[[response]]
name = "gain"
unit = "g/d"
role = "primary"
kind = "continuous"
` + response + `
` + size
}

func sized(t *testing.T, protocol string) (*result.SampleSize, diag.List) {
	t.Helper()
	f := folder.FromFS(fstest.MapFS{"protocol.toml": &fstest.MapFile{Data: []byte(protocol)}})
	tr, list := trial.Open(f)
	if list.HasErrors() || tr.Plan == nil {
		t.Fatalf("%v\n%s", list, protocol)
	}
	return Size(tr)
}

func hasCode(list diag.List, code string) bool {
	for _, d := range list {
		if d.Code == code {
			return true
		}
	}
	return false
}

func close9(t *testing.T, what string, got result.Number, want float64) {
	t.Helper()
	if !(math.Abs(float64(got)-want) <= 1e-8*math.Abs(want)) {
		t.Errorf("%s: %.12g, want %.12g", what, float64(got), want)
	}
}

const (
	sizePens   = "[[unit]]\nname = \"pen\"\ncount = 16\nreceives = [\"diet\"]\n"
	blocks     = "[[unit]]\nname = \"block\"\ncount = 6\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 4\nreceives = [\"diet\"]\n"
	sizeSquare = "[[unit]]\nname = \"cow\"\ncount = 4\n[[unit]]\nname = \"period\"\ncount = 4\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"diet\"]\n"
)

// Four treatments, completely randomized, error df ≥ 10: four replicates, 16 units; blocks
// with error df ≥ 12: five (common practice, no source). Whatever number the plan has.
func TestErrorDFRule(t *testing.T) {
	rule := "[sample_size]\nbasis = \"error df\"\n"
	for _, tt := range []struct {
		name, protocol    string
		replicates, units int
		df                int
	}{
		{"completely randomized", four(sizePens, rule), 4, 16, 12},
		{"of eight", four(strings.Replace(sizePens, "16", "8", 1), rule), 4, 16, 12},
		{"of 40", four(strings.Replace(sizePens, "16", "40", 1), rule), 4, 16, 12},
		{"two", diets(2, sizePens, rule, ""), 6, 12, 10},
		{"three", diets(3, strings.Replace(sizePens, "16", "9", 1), rule, ""), 5, 15, 12},
		{"five", diets(5, strings.Replace(sizePens, "16", "20", 1), rule, ""), 3, 15, 10},
		{"six", diets(6, strings.Replace(sizePens, "16", "12", 1), rule, ""), 3, 18, 12},
		{"of 18, unequal", four(strings.Replace(sizePens, "16", "18", 1), rule), 4, 16, 12},
		{"eight", diets(8, sizePens, rule, ""), 3, 24, 16},
		{"blocks", four(blocks, "[analysis]\nerror_df_min = 12\n"+rule), 5, 20, 12},
	} {
		s, _ := sized(t, tt.protocol)
		if s.Needed == nil || s.Needed.Replicates != tt.replicates || s.Needed.Units != tt.units || s.Needed.ErrorDF != tt.df {
			t.Errorf("%s: %+v", tt.name, s.Needed)
		}
	}
}

// R. Mead, The Design of Experiments (1988): error df N − 1 − blocks − treatments, advised
// between 10 and 20: 24 units of four treatments 20, in six blocks 15; four blocks 9.
func TestWindow(t *testing.T) {
	for _, tt := range []struct {
		units string
		df    int
		want  string
	}{
		{strings.Replace(sizePens, "16", "24", 1), 20, ", in the window"}, {blocks, 15, ", in the window"},
		{strings.Replace(blocks, "count = 6", "count = 4", 1), 9, ", below the window"}, {strings.Replace(sizePens, "16", "28", 1), 24, ", above the window"},
	} {
		s, _ := sized(t, four(tt.units, ""))
		if s.ErrorDF == nil || *s.ErrorDF != tt.df || !strings.Contains(prose.Window(*s.ErrorDF), tt.want) {
			t.Errorf("error df %v, want %d %s", s.ErrorDF, tt.df, tt.want)
		}
	}
}

// Smallest n of the tables of J. Neter et al. (see package power), by rebuilding the plan.
func TestSmallestReplicationOfPlans(t *testing.T) {
	for _, tt := range []struct {
		levels    int
		delta, sd string
		alpha     string
		power     string
		n         int
		reached   float64
	}{
		{4, "1.5", "1", "0.05", "0.9", 14, .9091825866}, {3, "1", "1", "0.05", "0.9", 27, .9077108361}, {3, "25", "25", "0.05", "0.8", 21, .8147696928},
		{4, "2", "1", "0.05", "0.8", 7, .8361289022}, {2, "1", "1", "0.05", "0.8", 17, .8070367151}, {4, "1", "1", "0.05", "0.8", 23, .8038632662}, {4, "1.5", "1", "0.01", "0.9", 19, 0},
	} {
		units := "[[unit]]\nname = \"pen\"\ncount = " + string(rune('0'+tt.levels)) + "\nreceives = [\"diet\"]\n"
		units = strings.Replace(units, "count = ", "count = 2", 1) // 24, 23 or 22 pens
		if tt.levels == 3 {
			units = strings.Replace(units, "23", "24", 1)
		}
		s, list := sized(t, diets(tt.levels, units, "[analysis]\nalpha = "+tt.alpha+"\n[sample_size]\nbasis = \"power\"\ndifference = "+tt.delta+"\nsd = "+tt.sd+"\npower = "+tt.power+"\n", ""))
		if s.Needed == nil || s.Needed.Replicates != tt.n {
			t.Errorf("%d levels, %s: %+v", tt.levels, tt.delta, s.Needed)
			continue
		}
		if tt.reached > 0 {
			close9(t, "power", s.Needed.Power, tt.reached)
		}
		if short := s.Replicates < tt.n; short != hasCode(list, "size-too-small") {
			t.Errorf("%d of %d replicates: %v", s.Replicates, tt.n, list)
		}
	}
}

// Powers of plans by their own formulas: λ = r δ²/(2σ²) and the error df of textbooks.
func TestPowerOfDesigns(t *testing.T) {
	wish := "[sample_size]\nbasis = \"power\"\ndifference = 1.5\nsd = 1\n"
	f := func(df1, df2, lambda float64) float64 {
		return dist.NoncentralFUpper(dist.FQuantile(.05, df1, df2), df1, df2, lambda)
	}
	for _, tt := range []struct {
		name, protocol string
		replicates, df int
		power          float64
	}{
		{"completely randomized", four(sizePens, wish), 4, 12, f(3, 12, 4*2.25/2)},
		{"blocks", four(blocks, wish), 6, 15, f(3, 15, 6*2.25/2)},
		{"Latin square", four(sizeSquare, wish), 4, 6, f(3, 6, 4*2.25/2)},
		{"two squares, own periods", four("[[unit]]\nname = \"square\"\ncount = 2\n[[unit]]\nname = \"cow\"\nwithin = \"square\"\ncount = 4\n[[unit]]\nname = \"period\"\nwithin = \"square\"\ncount = 4\n[[unit]]\nname = \"sample\"\ncrosses = [\"cow\", \"period\"]\nreceives = [\"diet\"]\n", wish), 8, 15, f(3, 15, 8*2.25/2)},
		{"generalized blocks", four(strings.Replace(blocks, "count = 4", "count = 8", 1), wish), 12, 39, f(3, 39, 12*2.25/2)},
		// Balanced incomplete blocks of three for seven diets: E = 7/9, error df 21 − 1 − 6 − 6.
		{"incomplete blocks", diets(7, strings.NewReplacer("count = 6", "count = 7", "count = 4", "count = 3").Replace(blocks), wish, ""), 3, 8, f(6, 8, 3*7./9*2.25/2)},
		// A square lattice of nine in two replicates: E = 2/3, error df 18 − 1 − 1 − 4 − 8.
		{"lattice", diets(9, "[[unit]]\nname = \"replicate\"\ncount = 2\n[[unit]]\nname = \"block\"\nwithin = \"replicate\"\ncount = 3\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 3\nreceives = [\"diet\"]\n", wish, ""), 2, 4, f(8, 4, 2*2./3*2.25/2)},
		// A Youden square of seven columns: each row holds all seven, E of columns of three 7/9.
		{"rows and columns", diets(7, "[[unit]]\nname = \"row\"\ncount = 3\n[[unit]]\nname = \"column\"\ncount = 7\n[[unit]]\nname = \"plot\"\ncrosses = [\"row\", \"column\"]\nreceives = [\"diet\"]\n", wish, ""), 3, 6, f(6, 6, 3*7./9*2.25/2)},
		// Direct effects of four treatments in a balanced crossover: E = 10/11, 3 df for carry-over.
		{"crossover", four(strings.Replace(sizeSquare, "count = 4", "count = 8", 1)+"[carryover]\nfactor = \"diet\"\nalong = \"period\"\non = \"cow\"\n", wish), 8, 15, f(3, 15, 8*10./11*2.25/2)},
		// Two least replicated levels: 1/2 + 1/2 of 14 pens with an eightfold control.
		{"unequal", four("[[unit]]\nname = \"pen\"\ncount = 14\nreceives = [\"diet\"]\nreplicates = { a = 8, b = 2, c = 2, d = 2 }\n", wish), 2, 10, f(3, 10, 2.25)},
		{"a covariate", four(blocks, "[[covariate]]\nname = \"initial\"\n"+wish), 6, 15, f(3, 15, 6*2.25/2)},
		{"its loss of one degree", diets(4, blocks, "[[covariate]]\nname = \"initial\"\n"+wish, "covariates = [\"initial\"]\n"), 6, 14, f(3, 14, 6*2.25/2)},
	} {
		t.Run(tt.name, func(t *testing.T) {
			s, list := sized(t, tt.protocol)
			if s.ErrorDF == nil || *s.ErrorDF != tt.df || s.Replicates != tt.replicates {
				t.Errorf("replicates %d, error df %v; %v", s.Replicates, s.ErrorDF, list)
			}
			close9(t, "power", s.Power, tt.power)
			x := dist.FQuantile(.05, float64(s.Terms[0].DF), float64(*s.ErrorDF))
			lambda := math.Pow(float64(s.Detectable/s.SED), 2)
			close9(t, "detectable", result.Number(dist.NoncentralFUpper(x, float64(s.Terms[0].DF), float64(*s.ErrorDF), lambda)), .8)
			close9(t, "of terms", s.Terms[0].Detectable, float64(s.Detectable))
			if len(s.Curve) < 3 {
				t.Errorf("curve %+v, notes %v", s.Curve, s.Notes)
			}
			for i := range s.Curve {
				if i > 0 && (s.Curve[i].Power < s.Curve[i-1].Power || s.Curve[i].Replicates <= s.Curve[i-1].Replicates) {
					t.Errorf("the curve falls: %+v", s.Curve)
				}
			}
		})
	}
}

const splitUnits = `[[factor]]
name = "grazing"
levels = ["x", "y", "z"]
[[unit]]
name = "block"
count = 4
[[unit]]
name = "paddock"
within = "block"
count = 3
receives = ["grazing"]
[[unit]]
name = "pen"
within = "paddock"
count = 4
receives = ["diet"]
`

// A split plot: σ² of a paddock is σ²p + σ²s/4; each term in its own error.
func TestSplitPlotSizes(t *testing.T) {
	f := func(df1, df2, lambda float64) float64 {
		return dist.NoncentralFUpper(dist.FQuantile(.05, df1, df2), df1, df2, lambda)
	}
	whole := .9*.9 + 1.2*1.2/4
	for _, tt := range []struct {
		term   string
		r, df  int
		lambda float64
		df1    float64
	}{
		{"grazing", 4, 6, 4 * 4 / (2 * whole), 2},
		{"diet", 12, 27, 12 * 4 / (2 * 1.44), 3},
		{"grazing:diet", 4, 27, 4 * 4 / (4 * 1.44), 6},
		{"diet:grazing", 4, 27, 4 * 4 / (4 * 1.44), 6},
	} {
		s, list := sized(t, four(splitUnits, "[sample_size]\nbasis = \"power\"\nterm = \""+tt.term+"\"\ndifference = 2\nsd = { paddock = 0.9, pen = 1.2 }\n"))
		if s.Replicates != tt.r || s.ErrorDF == nil || *s.ErrorDF != tt.df {
			t.Errorf("%s: %d replicates, error df %v; %v", tt.term, s.Replicates, s.ErrorDF, list)
			continue
		}
		close9(t, tt.term, s.Power, f(tt.df1, float64(tt.df), tt.lambda))
		if s.Grows == nil || s.Grows.Unit != "block" || s.Grows.Step != 1 {
			t.Errorf("%s grows by %+v", tt.term, s.Grows)
		}
	}
	s, list := sized(t, four(splitUnits, "[sample_size]\nbasis = \"power\"\nterm = \"grazing\"\ndifference = 2\nsd = { paddock = 0.9 }\n"))
	if s.Power.Known() || !strings.Contains(list[0].Message, "sample_size.sd.pen") || list[0].Pos.Line == 0 {
		t.Errorf("the SD of pens is missing: %v", list)
	}
}

// Groups of animals: σ² of a pen of six is σ²u + σ²a/6, or σ² (ρ + (1 − ρ)/6).
func TestGroupsOfAnimals(t *testing.T) {
	penned := strings.Replace(blocks, "count = 4", "count = 4\nanimals = 6", 1)
	wish := "[sample_size]\nbasis = \"power\"\ndifference = 60\nattrition = 0.05\n"
	s, _ := sized(t, four(penned, wish+"sd = { pen = 20, animal = 60 }\n"))
	close9(t, "SD", s.SD, math.Sqrt(20*20+60*60/6.))
	if s.Animals != 144 || len(s.Groups) < 6 {
		t.Errorf("%d animals, groups %+v", s.Animals, s.Groups)
	}
	icc, _ := sized(t, four(penned, wish+"sd = 60\nicc = 0.1\n"))
	close9(t, "by correlation", icc.SD, 60*math.Sqrt(.1+.9/6))
	sampled, _ := sized(t, four(blocks+"[[unit]]\nname = \"animal\"\nwithin = \"pen\"\ncount = 6\n", wish+"sd = { pen = 20, animal = 60 }\n"))
	close9(t, "animals as units", sampled.SD, float64(s.SD))
	uneven, _ := sized(t, four(strings.Replace(strings.Replace(blocks, "count = 4", "count = 4\nanimals = [6,6,6,4,6,6,6,4,6,6,6,4]", 1), "count = 6", "count = 3", 1), wish+"sd = { pen = 20, animal = 60 }\n"))
	close9(t, "unequal groups", uneven.SD, math.Sqrt(20*20+60*60*(3./4/6+1./4/4)))
	// The next row of groups doubles the animals; no number of them beats the pens.
	double, ever := s.Groups[3], s.Groups[4]
	close9(t, "twelve a pen", double.SD, math.Sqrt(20*20+60*60/12.))
	if double.Animals != 288 || ever.PerUnit.Known() || ever.Power <= double.Power || float64(ever.SD) != 20 {
		t.Errorf("groups %+v", s.Groups)
	}
	// r′ = ⌈r/(1 − q)⌉.
	if want := int(math.Ceil(float64(s.Needed.Replicates) / .95)); s.WithLosses == nil || s.WithLosses.Replicates != want {
		t.Errorf("with losses %+v, want %d", s.WithLosses, want)
	}
	missing, list := sized(t, four(blocks, wish+"sd = 60\nicc = 0.1\n"))
	if missing.Power.Known() || len(list) == 0 || !strings.Contains(list[0].Message, "animals") {
		t.Errorf("animals are missing: %v", list)
	}
}

// Contrasts, trends, one side, precision and equivalence on the same blocks.
func TestOtherTargets(t *testing.T) {
	contrast := "[[analysis.contrast]]\nname = \"a v. rest\"\nfactor = \"diet\"\nweights = { a = -3, b = 1, c = 1, d = 1 }\n"
	power := func(df, delta float64) float64 {
		x := dist.TQuantile(.025, df)
		return dist.NoncentralTUpper(x, df, delta) + dist.NoncentralTUpper(x, df, -delta)
	}
	s, _ := sized(t, four(blocks, contrast+"[sample_size]\nbasis = \"power\"\ncontrast = \"a v. rest\"\ndifference = 3\nsd = 1\n"))
	close9(t, "contrast", s.Power, power(15, 3/math.Sqrt(12./6)))
	s, _ = sized(t, four(blocks, contrast+"[sample_size]\nbasis = \"power\"\ncontrast = \"a v. rest\"\ndifference = 3\nsd = 1\nsides = 1\n"))
	close9(t, "one side", s.Power, dist.NoncentralTUpper(dist.TQuantile(.05, 15), 15, 3/math.Sqrt(12./6)))
	// The slope over 0, 20, 40, 60 has the variance σ²/(r Σ(x − x̄)²) = σ²/(6 · 2000).
	graded := strings.Replace(four(blocks, "[sample_size]\nbasis = \"power\"\ncontrast = \"diet: linear\"\ndifference = 0.02\nsd = 1\n"), `["a", "b", "c", "d"]`, "[0, 20, 40, 60]", 1)
	s, _ = sized(t, graded)
	close9(t, "slope", s.Power, power(15, .02*math.Sqrt(6*2000)))
	// Two-sided .68059548204 and one-sided .797667392023 for 1.5 σ, r = 6 and 15 df are those of
	// package power; here two means of six blocks have 5 df.
	two := strings.Replace(blocks, "count = 4", "count = 2", 1)
	s, _ = sized(t, diets(2, two, "[sample_size]\nbasis = \"power\"\ndifference = 1.5\nsd = 1\nsides = 1\n", ""))
	close9(t, "one-sided difference", s.Power, dist.NoncentralTUpper(dist.TQuantile(.05, 5), 5, 1.5*math.Sqrt(3)))
	s, _ = sized(t, four(blocks, "[sample_size]\nbasis = \"precision\"\nhalf_width = 1\nsd = 1\n"))
	close9(t, "half width", s.HalfWidth, dist.TQuantile(.025, 15)*math.Sqrt(2./6))
	for r := 2; ; r++ {
		if dist.TQuantile(.025, float64(3*(r-1)))*math.Sqrt(2/float64(r)) <= 1 {
			if s.Needed == nil || s.Needed.Replicates != r {
				t.Errorf("precision needs %d replicates, got %+v", r, s.Needed)
			}
			break
		}
	}
	// Two periods, two treatments, no carry-over in the model: total numbers 20 at ratio .95 and
	// 16 at equality for CV 20 % (Diletti et al. 1991, from memory), of a logarithm.
	crossed := strings.NewReplacer("count = 4\n[[unit]]\nname = \"period\"\ncount = 4", "count = 12\n[[unit]]\nname = \"period\"\ncount = 2").Replace(sizeSquare)
	for _, tt := range []struct {
		difference string
		n          int
		power      float64
	}{{"", 16, .8332000982}, {"difference = 0.05129329438755058\n", 20, .8346801909}} {
		s, list := sized(t, diets(2, crossed, "[sample_size]\nbasis = \"power\"\nmargin = 0.22314355131420976\ncv = 20\n"+tt.difference, "transform = \"log\"\n"))
		if s.Needed == nil || s.Needed.Replicates != tt.n {
			t.Errorf("equivalence: %+v, %v", s.Needed, list)
			continue
		}
		close9(t, "equivalence", s.Needed.Power, tt.power)
	}
	// Parallel groups of 20, limits ± 1 σ: .855804946791.
	s, _ = sized(t, diets(2, strings.Replace(sizePens, "16", "40", 1), "[sample_size]\nbasis = \"power\"\nmargin = 5\nsd = 5\n", ""))
	close9(t, "two groups", s.Power, .855804946791)
	// In per cent of the mean the same as in units.
	s, _ = sized(t, diets(2, strings.Replace(sizePens, "16", "40", 1), "[sample_size]\nbasis = \"power\"\nmargin = 20\ncv = 20\n", ""))
	close9(t, "in per cent", s.Power, .855804946791)
}

// Repeated measures: means over times and times within pens.
func TestRepeatedSizes(t *testing.T) {
	week := "[[repeated]]\nname = \"week\"\non = \"pen\"\nat = [2, 4, 6]\n"
	size := func(term string) string {
		return week + "[sample_size]\nbasis = \"power\"\nterm = \"" + term + "\"\ndifference = 2\nsd = { pen = 1, \"pen:week\" = 0.5 }\n"
	}
	f := func(df1, df2, lambda float64) float64 {
		return dist.NoncentralFUpper(dist.FQuantile(.05, df1, df2), df1, df2, lambda)
	}
	s, list := sized(t, diets(4, blocks, size("diet"), "repeated = \"week\"\n"))
	if !s.Power.Known() {
		t.Fatal(list, s.Notes)
	}
	close9(t, "diet", s.Power, f(3, 15, 6*4/(2*(1+.25/3))))
	s, _ = sized(t, diets(4, blocks, size("week"), "repeated = \"week\"\n"))
	df := float64(24*2 - 2 - 6)
	close9(t, "week", s.Power, f(2, df, 24*4/(2*.25)))
	s, _ = sized(t, diets(4, blocks, size("diet:week"), "repeated = \"week\"\n"))
	close9(t, "diet and week", s.Power, f(6, df, 6*4/(4*.25)))
}

// What is missing is named, at its place in the protocol; nothing panics.
func TestMissingKeys(t *testing.T) {
	for _, tt := range []struct{ name, size, want string }{
		{"percent with sd", "basis = \"power\"\ndifference_percent = 10\nsd = 3\n", "sample_size.cv"},
		{"difference with cv", "basis = \"power\"\ndifference = 10\ncv = 3\n", "sample_size.sd"},
		{"only animals", "basis = \"power\"\ndifference = 10\nsd = { pen = 3, animal = 4 }\n", "animals"},
		{"no spread of pens", "basis = \"power\"\ndifference = 10\nsd = { block = 3 }\n", "sample_size.sd.pen"},
	} {
		protocol := four(blocks, "[sample_size]\n"+tt.size)
		if tt.name == "only animals" {
			protocol = four(blocks+"animals = \"n\"\n[roster]\nfile = \"roster.csv\"\n", "[sample_size]\n"+tt.size)
		}
		f := folder.FromFS(fstest.MapFS{"protocol.toml": &fstest.MapFile{Data: []byte(protocol)}, "roster.csv": &fstest.MapFile{Data: []byte("block,pen,n\n")}})
		tr, opened := trial.Open(f)
		if tr.Plan == nil {
			t.Errorf("%s: %v", tt.name, opened)
			continue
		}
		s, list := Size(tr)
		if s.Power.Known() || len(list) != 1 || list[0].Code != "size-not-computed" || !strings.Contains(list[0].Message, tt.want) || list[0].Pos.Line == 0 {
			t.Errorf("%s: %v", tt.name, list)
		}
		if len(s.Terms) != 1 || !s.Terms[0].DetectableSD.Known() {
			t.Errorf("%s: what the layout tells is left out: %+v", tt.name, s.Terms)
		}
	}
	stated, list := sized(t, four(blocks, ""))
	if stated.Basis != "" || len(list) > 0 || stated.ErrorDFRule == nil || stated.ErrorDFRule.Replicates != 5 {
		t.Errorf("without [sample_size]: %+v, %v", stated, list)
	}
}

// Sites at which treatments interact at random: the error is site × diet, with as many
// replicates as there are sites.
func TestSitesSize(t *testing.T) {
	units := "[[unit]]\nname = \"site\"\ncount = 5\ninteracts = true\n[[unit]]\nname = \"pen\"\nwithin = \"site\"\ncount = 12\nreceives = [\"diet\"]\n"
	s, list := sized(t, four(units, "[sample_size]\nbasis = \"power\"\ndifference = 2\nsd = 1\n"))
	if s.Replicates != 5 || s.ErrorDF == nil || *s.ErrorDF != 12 || s.Grows == nil || s.Grows.Unit != "site" {
		t.Fatalf("%+v %v", s, list)
	}
	close9(t, "power", s.Power, dist.NoncentralFUpper(dist.FQuantile(.05, 3, 12), 3, 12, 5*4/2.))
}

// A plan near the greatest a trial may have is still told how many would do, and hens by
// the thousand in each house do not keep houses from being counted.
func TestLargeSizes(t *testing.T) {
	s, _ := sized(t, four("[[unit]]\nname = \"block\"\ncount = 25000\n[[unit]]\nname = \"pen\"\nwithin = \"block\"\ncount = 4\nreceives = [\"diet\"]\n",
		"[sample_size]\nbasis = \"power\"\ndifference = 0.5\nsd = 1\n"))
	if s.Needed == nil || s.Needed.Replicates < 80 || s.Needed.Replicates > 100 || s.ErrorDFRule == nil || s.ErrorDFRule.Replicates != 5 {
		t.Errorf("blocks: %+v, %+v, %+v", s.Needed, s.ErrorDFRule, s.Grows)
	}
	s, _ = sized(t, four("[[unit]]\nname = \"house\"\ncount = 8\nreceives = [\"diet\"]\n[[unit]]\nname = \"hen\"\nwithin = \"house\"\ncount = 50000\n",
		"[sample_size]\nbasis = \"power\"\ndifference = 1\nsd = { house = 1, hen = 4 }\n"))
	if s.Needed == nil || s.Needed.Replicates != 23 { // as for two means 1 σ apart, four levels, in Neter's table
		t.Errorf("houses: %+v", s.Needed)
	}
}

// An augmented design cannot grow: entries stand once. Its checks and entries have what
// the allotment leaves them, once there is one.
func TestFixedSize(t *testing.T) {
	protocol := `protocol = 1
[trial]
code = "HM-2"
title = "Lines"
objective = "Which line?"
[[treatment]]
code = "c1"
levels = {}
[[treatment]]
code = "c2"
levels = {}
`
	for _, e := range []string{"e1", "e2", "e3", "e4", "e5", "e6", "e7", "e8", "e9"} {
		protocol += "[[treatment]]\ncode = \"" + e + "\"\nlevels = {}\n"
	}
	protocol += `[[unit]]
name = "block"
count = 3
[[unit]]
name = "plot"
within = "block"
count = 5
receives = ["treatment"]
checks = ["c1", "c2"]
[[response]]
name = "yield"
unit = "t/ha"
kind = "continuous"
[sample_size]
basis = "stated"
source = "land at hand"
difference = 2
sd = 1
power = 0.8
`
	s, list := sized(t, protocol)
	if s.Power.Known() || s.Grows != nil || len(s.Notes) == 0 || len(list) > 0 {
		t.Errorf("%+v %v", s, list)
	}
}

// Second road: data made by the components of variance and analysed by the textbook sums
// of squares of blocks and of a split plot reject as often as computed.
func TestSizesSimulated(t *testing.T) {
	random := rand.New(rand.NewPCG(8, 21))
	const draws = 20_000
	agree := func(what string, count int, p result.Number) {
		t.Helper()
		if got := float64(count) / draws; math.Abs(got-float64(p)) > 4*math.Sqrt(float64(p)*(1-float64(p))/draws) {
			t.Errorf("%s: simulated %.4f, computed %.4f", what, got, float64(p))
		}
	}
	// Six blocks of four pens of six animals; two means 60 apart, the others midway.
	penned := strings.Replace(blocks, "count = 4", "count = 4\nanimals = 6", 1)
	s, _ := sized(t, four(penned, "[sample_size]\nbasis = \"power\"\ndifference = 60\nsd = { pen = 20, animal = 60 }\n"))
	count := 0
	for range draws {
		y := make([][]float64, 6)
		for b := range y {
			level := 50 * random.NormFloat64()
			for d := range 4 {
				pen := level + []float64{-30, 0, 0, 30}[d] + 20*random.NormFloat64()
				sum := 0.0
				for range 6 {
					sum += pen + 60*random.NormFloat64()
				}
				y[b] = append(y[b], sum/6)
			}
		}
		f, _ := twoWay(y)
		if dist.FUpper(f, 3, 15) < .05 {
			count++
		}
	}
	agree("blocks", count, s.Power)

	// Four blocks of three paddocks of four pens; grazing in paddocks, diet in pens.
	split := func(term, d string) *result.SampleSize {
		s, _ := sized(t, four(splitUnits, "[sample_size]\nbasis = \"power\"\nterm = \""+term+"\"\ndifference = "+d+"\nsd = { paddock = 0.9, pen = 1.2 }\n"))
		return s
	}
	whole, sub := split("grazing", "2.5"), split("diet", "1.5")
	wholes, subs := 0, 0
	for range draws {
		means := make([][]float64, 4) // of paddocks, for the whole plots
		within := 0.0                 // error sum of squares of pens
		diet := make([]float64, 4)
		type cell struct{ v [4][4]float64 }
		var y [3]cell // grazing → block × diet
		for b := range means {
			for g := range 3 {
				paddock := random.NormFloat64()*.9 + []float64{-1.25, 0, 1.25}[g]
				mean := 0.0
				for d := range 4 {
					v := paddock + []float64{-.75, 0, 0, .75}[d] + 1.2*random.NormFloat64()
					y[g].v[b][d] = v
					diet[d] += v / 12
					mean += v / 4
				}
				means[b] = append(means[b], mean)
			}
		}
		if f, _ := twoWay(means); dist.FUpper(f, 2, 6) < .05 {
			wholes++
		}
		// Pens: within each grazing, blocks × diet leave 9 degrees of freedom of error.
		for g := range 3 {
			var rows [][]float64
			for b := range 4 {
				rows = append(rows, y[g].v[b][:])
			}
			_, e := twoWay(rows)
			within += e
		}
		grand, ss := 0.0, 0.0
		for _, m := range diet {
			grand += m / 4
		}
		for _, m := range diet {
			ss += 12 * (m - grand) * (m - grand)
		}
		if dist.FUpper(ss/3/(within/27), 3, 27) < .05 {
			subs++
		}
	}
	agree("whole plots", wholes, whole.Power)
	agree("subplots", subs, sub.Power)

	// Equivalence of two groups of twelve within ± 1.2, truly 0.2 apart.
	s, _ = sized(t, diets(2, strings.Replace(sizePens, "16", "24", 1), "[sample_size]\nbasis = \"power\"\nmargin = 1.2\ndifference = 0.2\nsd = 1\n", ""))
	count = 0
	x := dist.TQuantile(.05, 22)
	for range draws {
		var m, ss [2]float64
		for g := range 2 {
			var v [12]float64
			for i := range v {
				v[i] = random.NormFloat64() + .2*float64(g)
				m[g] += v[i] / 12
			}
			for i := range v {
				ss[g] += (v[i] - m[g]) * (v[i] - m[g])
			}
		}
		se := math.Sqrt((ss[0] + ss[1]) / 22 * 2 / 12)
		if d := m[1] - m[0]; (d+1.2)/se > x && (1.2-d)/se > x {
			count++
		}
	}
	agree("equivalence", count, s.Power)
}

// twoWay is F of the columns of a two-way table without repetition, and the error sum of
// squares.
func twoWay(y [][]float64) (f, errorSS float64) {
	r, c := len(y), len(y[0])
	rows, columns, grand := make([]float64, r), make([]float64, c), 0.0
	for i := range y {
		for j, v := range y[i] {
			rows[i] += v / float64(c)
			columns[j] += v / float64(r)
			grand += v / float64(r*c)
		}
	}
	between := 0.0
	for _, m := range columns {
		between += float64(r) * (m - grand) * (m - grand)
	}
	for i := range y {
		for j, v := range y[i] {
			e := v - rows[i] - columns[j] + grand
			errorSS += e * e
		}
	}
	return between / float64(c-1) / (errorSS / float64((r-1)*(c-1))), errorSS
}

// Every published and hand-made layout has a size, whatever it is: nothing panics, the
// curve rises, and what the plan is said to need is reached by it and not by less.
func TestSizesOfAllLayouts(t *testing.T) {
	files, err := filepath.Glob("../testdata/reference/*.txtar")
	if err != nil || len(files) == 0 {
		t.Fatal(err)
	}
	computed := 0
	for _, name := range files {
		a, err := txtar.ParseFile(name)
		if err != nil {
			t.Fatal(err)
		}
		m := fstest.MapFS{}
		for _, f := range a.Files {
			m[f.Name] = &fstest.MapFile{Data: f.Data}
		}
		if m["protocol.toml"] == nil || strings.Contains(string(m["protocol.toml"].Data), "[sample_size]") {
			continue
		}
		m["protocol.toml"].Data = append(slices.Clip(m["protocol.toml"].Data), "\n[sample_size]\nbasis = \"power\"\ndifference = 2\nsd = 1\npower = 0.9\nattrition = 0.1\n"...)
		tr, list := trial.Open(folder.FromFS(m))
		if tr.Plan == nil {
			t.Errorf("%s: %v", name, list)
			continue
		}
		s, _ := Size(tr)
		if filepath.Base(name) == "catalyst.txtar" && (math.Abs(float64(s.Efficiency)-8./9) > 1e-12 || s.Bound) {
			t.Errorf("%s: E = λv/(rk) = 8/9, got %v", name, s.Efficiency) // balanced incomplete blocks, from the data
		}
		if s.Power.Known() {
			computed++
		} else if len(s.Notes) == 0 {
			t.Errorf("%s: no power and no reason", name)
		}
		for i := range s.Curve {
			if i > 0 && s.Curve[i].Power < s.Curve[i-1].Power-1e-12 {
				t.Errorf("%s: the curve falls: %+v", name, s.Curve)
			}
			if n := s.Needed; n != nil && (s.Curve[i].Power >= .9) != (s.Curve[i].Replicates >= n.Replicates) {
				t.Errorf("%s: needs %+v, but %+v", name, n, s.Curve[i])
			}
		}
		if s.Needed != nil && s.WithLosses != nil && s.WithLosses.Replicates < s.Needed.Replicates {
			t.Errorf("%s: losses need less: %+v", name, s.WithLosses)
		}
	}
	if computed < len(files)*3/4 {
		t.Errorf("the power of %d layouts of %d was computed", computed, len(files))
	}
}

// Random layouts with amounts that are usual or extreme: no panic, no power outside 0 and
// 1, no number that is infinite, and each gives power or a reason.
func TestSizesOfRandomTrials(t *testing.T) {
	n := 160
	if testing.Short() {
		n = 40
	}
	amounts := []string{
		"basis = \"power\"\ndifference = 2\nsd = 1\n", "basis = \"power\"\ndifference = 1e-200\nsd = 1e200\n", "basis = \"power\"\ndifference = 1e200\nsd = 1e-200\n",
		"basis = \"power\"\nmargin = 3\nsd = 1\nsides = 1\nattrition = 0.999\n", "basis = \"precision\"\nhalf_width = 1e-6\ncv = 10\n", "basis = \"error df\"\nattrition = 0.2\n",
		"basis = \"stated\"\nsource = \"x\"\ndifference = 1\nsd = 1\nicc = 0.3\npower = 0.999999\n", "basis = \"power\"\ndifference_percent = 10\ncv = 12\npower = 1e-9\n",
	}
	for seed := range uint64(n) {
		r := rand.New(rand.NewPCG(seed, 77))
		s := randomTrial(r)
		s.build()
		s.allot(r, true)
		order := make([]int, len(s.y))
		for i := range order {
			order[i] = i
		}
		m := s.files(order)
		term := ""
		if k := r.IntN(len(s.factors) + 1); k < len(s.factors) {
			term = "term = \"" + s.factors[k].name + "\"\n"
		}
		text := "\n[sample_size]\n" + amounts[int(seed)%len(amounts)] + term
		m["protocol.toml"] = &fstest.MapFile{Data: append(slices.Clip(m["protocol.toml"].Data), text...)}
		if seed%3 == 0 {
			delete(m, "allotment.csv")
			delete(m, "data.csv")
		}
		tr, list := trial.Open(folder.FromFS(m))
		if tr.Plan == nil {
			if list.HasErrors() {
				continue
			}
			t.Fatalf("seed %d: no plan", seed)
		}
		out, _ := Size(tr)
		for _, x := range []result.Number{out.Power, out.Efficiency} {
			if x.Known() && !(x >= 0 && x <= 1) {
				t.Errorf("seed %d: %g is no share; %s\n%s", seed, float64(x), text, m["protocol.toml"].Data)
			}
		}
		if !out.Power.Known() && !out.HalfWidth.Known() && out.Needed == nil && len(out.Notes) == 0 {
			t.Errorf("seed %d: neither numbers nor a reason\n%s", seed, m["protocol.toml"].Data)
		}
		if n := out.Needed; n != nil && n.Power.Known() && out.Basis == "power" && n.Power < out.Wished-1e-9 {
			t.Errorf("seed %d: %+v does not reach %g", seed, n, float64(out.Wished))
		}
		for i := range out.Curve {
			if i > 0 && out.Curve[i].Power.Known() && out.Curve[i].Power < out.Curve[i-1].Power-1e-9 && out.Curve[i].Replicates > out.Curve[i-1].Replicates {
				t.Errorf("seed %d: the curve falls\n%+v\n%s", seed, out.Curve, m["protocol.toml"].Data)
			}
		}
	}
}
