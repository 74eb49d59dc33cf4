package analysis

import (
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/folder"
)

// analysed is the first response of a sketch, nil where the trial does not open.
func analysed(s *sketch, order []int) *result.Response {
	tr, list := trial.Open(folder.FromFS(s.files(order)))
	if list.HasErrors() {
		return nil
	}
	rs, _ := Run(tr, result.Program{Name: "test"}, nil)
	return &rs.Responses[0]
}

// Order of rows, names of units and of treatments, origin and unit of measurement change
// what they must and nothing else; and where every combination of treatments is equally
// replicated, all adjustments agree.
func TestInvariance(t *testing.T) {
	n := 120
	if testing.Short() {
		n = 40
	}
	tally := map[string]int{}
	for k := range n {
		r := rand.New(rand.NewPCG(99, uint64(k)))
		s := randomTrial(r)
		for len(s.y) > 72 {
			s = randomTrial(r)
		}
		base := analysed(s, nil)
		if base == nil {
			continue
		}
		fail := func(what, why string) {
			if why != "" {
				t.Errorf("trial %d, %s: %s\n%s", k, what, why, describe(s))
			}
		}
		tally["rows"]++
		fail("rows in another order", sameText(base, analysed(s, r.Perm(len(s.y)))))
		if base.Model == nil {
			continue
		}

		moved := *s
		moved.y = nil
		for _, v := range s.y {
			moved.y = append(moved.y, 1000-0.25*v)
		}
		tally["scale"]++
		fail("measured otherwise", scaledBy(base, analysed(&moved, nil), 1000, -0.25))

		if renamed := s.renamed(r); renamed != nil {
			tally["units"]++
			fail("units renamed", sameEffects(base, analysed(renamed, nil), s.adjustment))
		}
		if s.listed == nil {
			tally["levels"]++
			fail("levels in another order", sameEffects(base, analysed(s.turned(), nil), s.adjustment))
		}
		if s.even(base) {
			tally["adjustments"]++
			for _, adjustment := range []string{"partial", "marginal", "sequential"} {
				other := *s
				other.adjustment = adjustment
				fail("adjustment "+adjustment, sameEffects(base, analysed(&other, nil), ""))
			}
		}
	}
	t.Log(tally)
	for what, least := range map[string]int{"rows": n / 2, "scale": n / 4, "units": n / 8, "levels": n / 4, "adjustments": n / 10} {
		if tally[what] < least {
			t.Errorf("only %d trials for %s", tally[what], what)
		}
	}
}

// sameText compares all that is written of a response.
func sameText(a, b *result.Response) string {
	x, _ := json.Marshal(a)
	y, _ := json.Marshal(b)
	if string(x) == string(y) {
		return ""
	}
	i := 0
	for i < len(x) && i < len(y) && x[i] == y[i] {
		i++
	}
	return fmt.Sprintf("…%.160s\nwas\n…%.160s", y[max(0, i-80):], x[max(0, i-80):])
}

// How numbers follow y → at + by·y.
const (
	fixedNumber  = iota
	affine       // at + by·
	proportional // by·
	absolute     // |by|·
	square       // by²·
	loose        // as they like
)

// follow says how a number of a list of a response follows the response.
func follow(list, key string) int {
	switch key {
	case "ss", "ms":
		return square
	case "grand_mean", "mean", "observed", "fitted":
		if list == "sed" {
			return absolute
		}
		return affine
	case "sd", "sem":
		return absolute
	case "cv_percent", "log_likelihood", "aicc":
		return loose
	case "se":
		if list == "components" {
			return square
		}
		return absolute
	case "estimate":
		if list == "components" {
			return square
		}
		return proportional
	case "slope", "difference", "residual", "studentized", "deleted":
		return proportional
	case "min", "max":
		if list == "sed" {
			return absolute
		}
		return affine
	case "lsd":
		return absolute
	case "lower", "upper":
		if list == "means" {
			return affine
		}
		return proportional
	case "statistic":
		return loose // t has a sign, others have none
	case "normal_score", "envelope_lower", "envelope_upper":
		return loose // the order is turned
	}
	return fixedNumber
}

// scaledBy holds a response against the same one measured as at + by·y, by negative.
func scaledBy(a, b *result.Response, at, by float64) string {
	decode := func(r *result.Response) map[string]any {
		var out map[string]any
		x, err := json.Marshal(r)
		if err == nil {
			err = json.Unmarshal(x, &out)
		}
		if err != nil {
			panic(err)
		}
		return out
	}
	x, y := decode(a), decode(b)
	spread := 0.0
	for _, l := range a.Anova {
		spread = math.Max(spread, math.Sqrt(math.Abs(float64(l.MS))))
	}
	for _, c := range a.Components {
		spread = math.Max(spread, math.Sqrt(math.Abs(float64(c.Estimate))))
	}
	var faults []string
	near := func(where, list, key string, v, w float64) {
		want := v
		scale := 1.0
		switch follow(list, key) {
		case affine:
			want, scale = at+by*v, 1000
		case proportional:
			want, scale = by*v, spread*math.Abs(by)
			if key == "studentized" || key == "deleted" {
				want, scale = -v, 1
			}
		case absolute:
			want, scale = math.Abs(by)*v, spread*math.Abs(by)
		case square:
			want, scale = by*by*v, by*by*spread*spread
		case loose:
			return
		}
		if math.Abs(w-want) > 1e-7*math.Max(math.Abs(want), scale) {
			faults = append(faults, fmt.Sprintf("%s: %.10g, want %.10g", where, w, want))
		}
	}
	var walk func(where, list, key string, v, w any)
	walk = func(where, list, key string, v, w any) {
		switch v := v.(type) {
		case float64:
			g, ok := w.(float64)
			if !ok {
				faults = append(faults, fmt.Sprintf("%s: %v, was %v", where, w, v))
				return
			}
			near(where, list, key, v, g)
		case map[string]any:
			g := w.(map[string]any)
			upper, lower := v["upper"], v["lower"]
			for k, e := range v {
				switch {
				case k == "upper" && lower != nil: // a negative factor turns limits over
					walk(where+".upper", list, k, e, g["lower"])
				case k == "lower" && upper != nil:
					walk(where+".lower", list, k, e, g["upper"])
				case k == "max" && list == "summary":
					walk(where+".max", list, k, e, g["min"])
				case k == "min" && list == "summary":
					walk(where+".min", list, k, e, g["max"])
				default:
					walk(where+"."+k, list, k, e, g[k])
				}
			}
		case []any:
			g, ok := w.([]any)
			if !ok || len(g) != len(v) {
				faults = append(faults, where+": lists of different length")
				return
			}
			for i, e := range v {
				walk(fmt.Sprintf("%s[%d]", where, i), list, key, e, g[i])
			}
		default:
			if fmt.Sprint(v) != fmt.Sprint(w) && key != "letters" { // they follow the order of means
				faults = append(faults, fmt.Sprintf("%s: %v, was %v", where, w, v))
			}
		}
	}
	for key, v := range x {
		switch key {
		case "notes", "diagnostics":
			continue // sentences with numbers in them, and a slope of spread on mean
		}
		walk(key, key, key, v, y[key])
	}
	if len(faults) > 5 {
		faults = faults[:5]
	}
	return strings.Join(faults, "\n\t")
}

// sameEffects compares tests, means and their standard errors, each found by its name. In
// sequence a change of order may change tests; it must not change means.
func sameEffects(a, b *result.Response, adjustment string) string {
	if b == nil || b.Model == nil {
		return "refused"
	}
	if a.Model.Method != b.Model.Method {
		return "analysed by " + b.Model.Method + ", was " + a.Model.Method
	}
	var faults []string
	near := func(what string, v, w result.Number, scale float64) {
		if v.Known() != w.Known() || v.Known() && math.Abs(float64(v-w)) > 1e-7*math.Max(math.Abs(float64(v)), scale) {
			faults = append(faults, fmt.Sprintf("%s: %v, was %v", what, w, v))
		}
	}
	if adjustment != "sequential" {
		for i, x := range a.Tests {
			if i >= len(b.Tests) || b.Tests[i].Source != x.Source {
				return "tests differ in number or order"
			}
			near("F of "+x.Source, x.F, b.Tests[i].F, 1e-3)
			near("P of "+x.Source, x.P, b.Tests[i].P, 1e-3)
		}
	}
	for _, x := range a.Means {
		i := slices.IndexFunc(b.Means, func(m result.Mean) bool {
			if m.Term != x.Term {
				return false
			}
			for _, l := range x.Levels {
				if m.Levels.Of(l.Factor) != l.Level {
					return false
				}
			}
			return true
		})
		if i < 0 {
			return fmt.Sprintf("no mean of %v", x.Levels)
		}
		near(fmt.Sprintf("mean of %v", x.Levels), x.Mean, b.Means[i].Mean, 1)
		near(fmt.Sprintf("se of mean of %v", x.Levels), x.SE, b.Means[i].SE, 1e-3)
	}
	for i, x := range a.SED {
		near("sed of "+x.Term, x.Max, b.SED[i].Max, 1e-3)
	}
	if len(faults) > 5 {
		faults = faults[:5]
	}
	return strings.Join(faults, "\n\t")
}

// renamed gives units other numbers among those of the same parent; nil where numbers mean
// something, as counts or time.
func (s *sketch) renamed(r *rand.Rand) *sketch {
	if s.trend {
		return nil
	}
	for _, u := range s.units {
		if len(u.count) > 1 {
			return nil
		}
	}
	out := *s
	out.own = nil
	for u := range s.units {
		own := slices.Clone(s.own[u])
		by := map[int][]int{}
		for i := range own {
			p := -1
			if w := s.units[u].within; w >= 0 {
				p = s.up[u][i][w]
			}
			by[p] = append(by[p], i)
		}
		for p := range len(own) + 1 {
			members := by[p-1]
			for k, j := range r.Perm(len(members)) {
				own[members[k]] = s.own[u][members[j]]
			}
		}
		out.own = append(out.own, own)
	}
	return &out
}

// turned writes the levels of every factor in reverse.
func (s *sketch) turned() *sketch {
	out := *s
	out.factors, out.level = nil, nil
	for f, of := range s.factors {
		of.levels, of.values = slices.Clone(of.levels), slices.Clone(of.values)
		slices.Reverse(of.levels)
		slices.Reverse(of.values)
		of.control = false
		out.factors = append(out.factors, of)
		var level []int
		for _, l := range s.level[f] {
			level = append(level, len(of.levels)-1-l)
		}
		out.level = append(out.level, level)
	}
	out.contrast = nil
	return &out
}

// even tells whether every combination of all factors is equally often there, on larger
// units that are all alike, with nothing to adjust for.
func (s *sketch) even(base *result.Response) bool {
	if len(s.covariates) > 0 || s.trend || slices.Contains(s.missing, true) {
		return false
	}
	count := map[string]int{}
	cells := 1
	for f := range s.factors {
		cells *= len(s.factors[f].levels)
	}
	for i := range s.y {
		key := ""
		for f := range s.factors {
			key += fmt.Sprint(s.rowLevel(f, i), " ")
		}
		count[key]++
	}
	for _, n := range count {
		if n*cells != len(s.y) {
			return false
		}
	}
	return base.Model.Method == "strata"
}
