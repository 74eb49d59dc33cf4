// Package compare judges differences between estimates: multiple comparison
// procedures, letters, planned contrasts and trends.
//
// It knows nothing of where estimates come from. They arrive with the standard error
// and degrees of freedom of each difference as a function, so that one package serves
// analyses by strata, least squares and mixed models.
package compare

import (
	"errors"
	"math"
	"slices"

	"penwright/analysis/dist"
)

// Method is a multiple comparison procedure.
type Method int

// The methods. LSD is t for each pair by itself; ProtectedLSD the same with P never below
// that of the F test of the term (Fisher 1935). Tukey is Tukey-Kramer where numbers are
// unequal (Kramer, Biometrics 12 (1956) 307).
const (
	None Method = iota
	LSD
	ProtectedLSD
	Tukey
	Dunnett
	Bonferroni
	Holm
	Sidak
	Scheffe
	NewmanKeuls
	Duncan
)

var methodNames = [...]string{
	None: "none", LSD: "lsd", ProtectedLSD: "protected lsd", Tukey: "tukey", Dunnett: "dunnett", Bonferroni: "bonferroni",
	Holm: "holm", Sidak: "sidak", Scheffe: "scheffe", NewmanKeuls: "newman-keuls", Duncan: "duncan",
}

func (m Method) String() string {
	if m < 0 || int(m) >= len(methodNames) {
		return "unknown method"
	}
	return methodNames[m]
}

// ParseMethod returns the method with the given name, and whether there is one.
func ParseMethod(name string) (Method, bool) {
	for i, n := range methodNames {
		if n == name {
			return Method(i), true
		}
	}
	return None, false
}

// Conditions under which a method cannot be carried out.
var (
	ErrOneSided = errors.New("compare: the method has no one-sided form")
	ErrNoF      = errors.New("compare: the method needs the F test of the term")
	ErrControl  = errors.New("compare: the pairs do not share one control")
	ErrUnequal  = errors.New("compare: the method needs equal standard errors and degrees of freedom")
	ErrNotAll   = errors.New("compare: the method needs all pairs of the means compared")
)

// Pair is the difference of estimate A minus estimate B, by their indices.
type Pair struct{ A, B int }

// Family is a set of comparisons whose errors are controlled together.
type Family struct {
	// Estimates, in response units. NaN where one cannot be estimated.
	Estimates []float64

	// Pairs are the comparisons of the family. Those among them that cannot be
	// estimated are reported with NaN and do not count.
	Pairs []Pair

	// Diff returns the standard error of estimate i minus estimate j and its degrees of
	// freedom (+Inf allowed); NaN where the difference cannot be estimated. It does not
	// depend on the order of i and j. Dunnett asks it for pairs of treatments too.
	Diff func(i, j int) (se, df float64)

	// TermP is the P of the F test of the term, for ProtectedLSD; TermDF its numerator
	// degrees of freedom, for Scheffe. NaN or zero where there is none.
	TermP, TermDF float64
}

// Difference is one comparison.
type Difference struct {
	Pair
	Estimate, SE, DF float64

	// Statistic is t; for Tukey, NewmanKeuls and Duncan q = √2|t|; for Scheffe F = t²/TermDF.
	Statistic float64

	// P is that of t alone, on the side asked for; Adjusted that of the method.
	P, Adjusted float64

	// Lower and Upper are limits of the difference, simultaneous over the family but for
	// LSD and ProtectedLSD; infinite on the open side of one-sided comparisons; NaN where
	// the method has none (Holm, NewmanKeuls, Duncan).
	Lower, Upper float64
}

// Result is a family judged by one method.
type Result struct {
	Differences []Difference // in the order of Family.Pairs

	// Approximate: the method's distribution presumes common standard errors (Tukey) or
	// degrees of freedom (Tukey, Dunnett, Scheffe); they differ, and each difference was
	// judged with its own. Or one-sided Sidak, whose inequality is proven for two sides only
	// (Z. Šidák, JASA 62 (1967) 626).
	Approximate bool

	// Correlations: the correlations of comparisons with the control are not of the form
	// λᵢλⱼ that Dunnett's distribution needs; the nearest of that form were used.
	Correlations bool
}

// Differ returns whether two estimates were declared different at level alpha, in either
// order of its arguments. Pairs that were not compared, or could not be, do not differ.
func (r Result) Differ(alpha float64) func(i, j int) bool {
	declared := map[Pair]bool{}
	for _, d := range r.Differences {
		declared[Pair{A: min(d.A, d.B), B: max(d.A, d.B)}] = d.Adjusted <= alpha
	}
	return func(i, j int) bool { return declared[Pair{A: min(i, j), B: max(i, j)}] }
}

// same is the relative difference up to which standard errors and degrees of freedom
// count as equal: they come out of different sums.
const same = 1e-8

// Run judges the differences of f by method m. Limits are at confidence 1 − alpha,
// 0 < alpha < 1. None gives no differences. Side refers to A − B.
//
// The error is one of the conditions of this package, or nil.
func (f Family) Run(m Method, side dist.Side, alpha float64) (Result, error) {
	if !(alpha > 0 && alpha < 1) {
		panic("compare: alpha outside (0, 1)")
	}
	if m == None || len(f.Pairs) == 0 {
		return Result{}, nil
	}
	if side != dist.Two && (m == Tukey || m == Scheffe || m == NewmanKeuls || m == Duncan) {
		return Result{}, ErrOneSided
	}
	r := Result{Differences: make([]Difference, len(f.Pairs))}
	var tested []*Difference
	for i, pair := range f.Pairs {
		d := &r.Differences[i]
		*d = f.difference(pair, side)
		if !math.IsNaN(d.P) {
			tested = append(tested, d)
		}
	}
	if len(tested) == 0 {
		return r, nil
	}
	equalSE, equalDF := true, true
	for _, d := range tested {
		equalSE = equalSE && nearly(d.SE, tested[0].SE)
		equalDF = equalDF && nearly(d.DF, tested[0].DF)
	}
	count := float64(len(tested))
	switch m {
	case LSD:
		for _, d := range tested {
			d.Adjusted = d.P
		}
		limits(tested, side, func(df float64) float64 { return pointT(alpha, df, side) })
	case ProtectedLSD:
		if !(f.TermP >= 0 && f.TermP <= 1) {
			return Result{}, ErrNoF
		}
		for _, d := range tested {
			d.Adjusted = math.Max(d.P, f.TermP)
		}
		limits(tested, side, func(df float64) float64 { return pointT(alpha, df, side) })
	case Bonferroni:
		for _, d := range tested {
			d.Adjusted = math.Min(1, count*d.P)
		}
		limits(tested, side, func(df float64) float64 { return pointT(alpha/count, df, side) })
	case Sidak:
		for _, d := range tested {
			d.Adjusted = -math.Expm1(count * math.Log1p(-d.P))
		}
		level := -math.Expm1(math.Log1p(-alpha) / count)
		limits(tested, side, func(df float64) float64 { return pointT(level, df, side) })
		r.Approximate = side != dist.Two
	case Holm:
		holm(tested)
	case Scheffe:
		if !(f.TermDF > 0) {
			return Result{}, ErrNoF
		}
		for _, d := range tested {
			d.Statistic = d.Statistic * d.Statistic / f.TermDF
			d.Adjusted = dist.FUpper(d.Statistic, f.TermDF, d.DF)
		}
		limits(tested, side, func(df float64) float64 { return math.Sqrt(f.TermDF * dist.FQuantile(alpha, f.TermDF, df)) })
		r.Approximate = !equalDF
	case Tukey:
		q := dist.NewStudentizedRange(len(means(tested)))
		for _, d := range tested {
			d.Statistic = math.Sqrt2 * math.Abs(d.Statistic)
			d.Adjusted = q.Upper(d.Statistic, d.DF)
		}
		limits(tested, side, func(df float64) float64 { return q.Quantile(alpha, df) / math.Sqrt2 })
		r.Approximate = !equalSE || !equalDF
	case Dunnett:
		lambda, exact, err := f.lambda(tested, side)
		if err != nil {
			return Result{}, err
		}
		most := dist.NewDunnett(lambda, side)
		for _, d := range tested {
			switch side {
			case dist.Two:
				d.Adjusted = most.Upper(math.Abs(d.Statistic), d.DF)
			case dist.Greater:
				d.Adjusted = most.Upper(d.Statistic, d.DF)
			case dist.Less:
				d.Adjusted = most.Upper(-d.Statistic, d.DF)
			}
		}
		limits(tested, side, func(df float64) float64 { return most.Quantile(alpha, df) })
		r.Approximate = !equalDF
		r.Correlations = !exact
	case NewmanKeuls, Duncan:
		if !equalSE || !equalDF {
			return Result{}, ErrUnequal
		}
		if err := f.ranges(tested, m); err != nil {
			return Result{}, err
		}
	default:
		panic("compare: unknown method")
	}
	return r, nil
}

func nearly(a, b float64) bool {
	return a == b || math.Abs(a-b) <= same*math.Max(math.Abs(a), math.Abs(b))
}

// difference returns the comparison of a pair with its t and P, the rest NaN.
func (f Family) difference(pair Pair, side dist.Side) Difference {
	nan := math.NaN()
	d := Difference{Pair: pair, Estimate: f.Estimates[pair.A] - f.Estimates[pair.B], Adjusted: nan, Lower: nan, Upper: nan}
	d.SE, d.DF = f.Diff(pair.A, pair.B)
	d.Statistic = d.Estimate / d.SE
	if !(d.SE >= 0) {
		d.Statistic = nan
	}
	switch side {
	case dist.Two:
		d.P = dist.TTwoSided(d.Statistic, d.DF)
	case dist.Greater:
		d.P = dist.TUpper(d.Statistic, d.DF)
	case dist.Less:
		d.P = dist.TUpper(-d.Statistic, d.DF)
	}
	return d
}

// pointT returns the t beyond which lies alpha, on both sides or on one.
func pointT(alpha, df float64, side dist.Side) float64 {
	if side == dist.Two {
		alpha /= 2
	}
	return dist.TQuantile(alpha, df)
}

// limits sets the limits from the critical value of t, which is asked for once for
// each run of equal degrees of freedom.
func limits(tested []*Difference, side dist.Side, point func(df float64) float64) {
	known := map[float64]float64{}
	for _, d := range tested {
		t, ok := known[d.DF]
		if !ok {
			t = point(d.DF)
			known[d.DF] = t
		}
		d.Lower, d.Upper = d.Estimate-t*d.SE, d.Estimate+t*d.SE
		switch side {
		case dist.Greater:
			d.Upper = math.Inf(1)
		case dist.Less:
			d.Lower = math.Inf(-1)
		}
	}
}

// holm sets the step-down adjusted P (S. Holm, Scand. J. Statist. 6 (1979) 65).
func holm(tested []*Difference) {
	order := slices.Clone(tested)
	slices.SortStableFunc(order, func(a, b *Difference) int {
		switch {
		case a.P < b.P:
			return -1
		case a.P > b.P:
			return 1
		}
		return 0
	})
	var most float64
	for i, d := range order {
		most = math.Max(most, math.Min(1, float64(len(order)-i)*d.P))
		d.Adjusted = most
	}
}

// means returns the indices of the estimates compared, ascending.
func means(tested []*Difference) []int {
	var index []int
	for _, d := range tested {
		index = append(index, d.A, d.B)
	}
	slices.Sort(index)
	return slices.Compact(index)
}

// ranges sets the adjusted P of Newman-Keuls or Duncan: for means in order of size, a
// range of p of them is judged in its own distribution, and no range is declared
// significant inside one that is not.
func (f Family) ranges(tested []*Difference, m Method) error {
	index := means(tested)
	n := len(index)
	slices.SortStableFunc(index, func(a, b int) int {
		switch {
		case f.Estimates[a] < f.Estimates[b]:
			return -1
		case f.Estimates[a] > f.Estimates[b]:
			return 1
		}
		return 0
	})
	rank := make([]int, len(f.Estimates))
	for i, j := range index {
		rank[j] = i
	}
	span := make([]*Difference, n*n) // by rank of the lower and the higher mean
	for _, d := range tested {
		low, high := min(rank[d.A], rank[d.B]), max(rank[d.A], rank[d.B])
		span[low*n+high] = d
	}
	for low := range n {
		for high := low + 1; high < n; high++ {
			if span[low*n+high] == nil {
				return ErrNotAll
			}
		}
	}
	var duncan *dist.Duncan
	if m == Duncan {
		duncan = dist.NewDuncan(n)
	}
	for p := n; p >= 2; p-- {
		var q *dist.StudentizedRange
		if m == NewmanKeuls {
			q = dist.NewStudentizedRange(p)
		}
		for low := 0; low+p <= n; low++ {
			high := low + p - 1
			d := span[low*n+high]
			d.Statistic = math.Sqrt2 * math.Abs(d.Statistic)
			if m == Duncan {
				d.Adjusted = duncan.P(d.Statistic, p, d.DF)
			} else {
				d.Adjusted = q.Upper(d.Statistic, d.DF)
			}
			if low > 0 {
				d.Adjusted = math.Max(d.Adjusted, span[(low-1)*n+high].Adjusted)
			}
			if high < n-1 {
				d.Adjusted = math.Max(d.Adjusted, span[low*n+high+1].Adjusted)
			}
		}
	}
	return nil
}
