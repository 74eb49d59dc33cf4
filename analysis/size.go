package analysis

import (
	"math"
	"slices"
	"strings"

	"penwright/analysis/power"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/layout"
)

// Codes of what Size reports beside the notes of its result.
const (
	sizeCheck   = "size"
	sizeUnknown = "size-not-computed"
	sizeShort   = "size-too-small"
)

// usualPower is what the detectable difference is shown for where no power is stated.
const usualPower = 0.80

// Size computes what the number of units of a plan buys: power, detectable difference,
// precision, the replication that would do, and how they change with replication,
// difference and spread. A protocol without [sample_size] gets what the layout alone
// tells. What cannot be computed is null, and a note names the keys that are missing;
// where the number of units is said to be chosen by it, that is a warning in the list too.
func Size(t *trial.Trial) (*result.SampleSize, diag.List) {
	z := newSizer(t)
	z.compute()
	return z.out, z.list
}

// size is the part of the results on the number of units, with its check; nil when the
// protocol gives no reason for the number.
func size(t *trial.Trial) (*result.SampleSize, []result.Check) {
	if t.Protocol.SampleSize == nil {
		return nil, nil
	}
	z := newSizer(t)
	z.compute()
	return z.out, z.checks()
}

// sizer gathers what a sample size is computed from.
type sizer struct {
	trial *trial.Trial
	plan  *layout.Plan
	s     protocol.SampleSize // the zero value where nothing is stated
	r     *protocol.Response  // nil where none is named
	alpha float64
	sides int
	wish  float64 // wished power; 0: none stated

	target target
	spread spread // of the target's experimental unit
	diff   float64
	margin float64
	half   float64
	scale  string
	eff    efficiency

	grower grower
	known  bool     // something is wished for
	does   bool     // and the plan reaches it
	losses int      // replicates needed with the losses that are expected; 0: none are
	now    *setting // of the plan as it stands
	out    *result.SampleSize
	list   diag.List
}

func newSizer(t *trial.Trial) *sizer {
	z := &sizer{trial: t, plan: t.Plan, alpha: t.Protocol.Analysis.Alpha, sides: 2}
	nan := result.NaN
	z.out = &result.SampleSize{
		Power: nan, Difference: nan, Curve: []result.PowerPoint{}, Wished: nan, Margin: nan, SD: nan, Efficiency: nan, SED: nan, Detectable: nan,
		HalfWidth: nan, WishedHalf: nan, Attrition: nan, ByDifference: []result.DifferencePower{}, BySD: []result.SDPower{}, Groups: []result.GroupPower{},
		Terms: []result.TermPower{}, Notes: []result.Note{},
	}
	if s := t.Protocol.SampleSize; s != nil {
		z.s = *s
		if s.Sides == 1 {
			z.sides = 1
		}
		if s.Power != nil {
			z.wish = *s.Power
		}
		z.r = t.Protocol.Response(s.Response)
		if z.r == nil && s.Response == "" {
			z.r = primary(t.Protocol)
		}
	} else {
		z.r = primary(t.Protocol)
	}
	if z.r != nil && z.r.Alpha != nil {
		z.alpha = *z.r.Alpha
	}
	z.out.Basis, z.out.Response = z.s.Basis, z.s.Response
	if z.r != nil {
		z.out.Response = z.r.Name
	}
	return z
}

// primary is the only primary response, or nil.
func primary(p *protocol.Protocol) *protocol.Response {
	var one *protocol.Response
	for i := range p.Responses {
		if p.Responses[i].Role == "primary" {
			if one != nil {
				return nil
			}
			one = &p.Responses[i]
		}
	}
	return one
}

func (z *sizer) note(code, text string) {
	z.out.Notes = append(z.out.Notes, result.Note{Code: code, Text: text, Term: z.out.Term})
}

// missing says what stands in the way of a computation, at a key of [sample_size].
func (z *sizer) missing(key, text, hint string) {
	z.note("size-missing", text)
	if z.s.Basis != "power" && z.s.Basis != "precision" {
		return
	}
	at := "sample_size." + key
	if key == "" {
		at = "sample_size"
	}
	pos := z.trial.Protocol.Pos(at)
	if pos.Line == 0 {
		pos = z.trial.Protocol.Pos("sample_size")
	}
	message := strings.TrimSuffix(text, ".")
	z.list.Add(diag.Diagnostic{Pos: pos, Key: at, Severity: diag.Warning, Code: sizeUnknown, Message: "the size is not computed: " + lowerStart(message), Hint: hint})
}

// lowerStart lowers the first letter of a sentence that follows a colon.
func lowerStart(s string) string {
	if len(s) > 1 && s[0] >= 'A' && s[0] <= 'Z' && s[1] >= 'a' && s[1] <= 'z' {
		return string(s[0]+'a'-'A') + s[1:]
	}
	return s
}

// compute fills the result step by step; each step says what it lacks and the later ones
// do what can be done without it.
func (z *sizer) compute() {
	out := z.out
	out.Alpha, out.Sides = result.Number(z.alpha), z.sides
	if z.wish > 0 {
		out.Wished = result.Number(z.wish)
	}
	if z.s.Attrition != nil {
		out.Attrition = result.Number(*z.s.Attrition)
	}
	for i := range z.plan.Units {
		for _, a := range z.plan.Units[i].Animals {
			out.Animals += a
		}
	}
	ok := z.find()
	if ok {
		out.Term, out.Contrast, out.Unit = z.target.name, z.s.Contrast, z.plan.Units[z.target.unit].Name
		z.eff = z.efficiency(z.target)
		z.now = z.setting(z.plan)
		out.Replicates, out.Units = z.now.replicates, z.plan.Units[z.target.unit].N
		if z.now.errorDF >= 0 {
			df := z.now.errorDF
			out.ErrorDF = &df
		}
		if z.eff.reason == "" {
			out.Efficiency, out.Bound = result.Number(z.eff.value), z.eff.bound
		}
		z.grower = z.grows()
		z.now.count = z.grower.count
		if z.grower.step > 0 {
			out.Grows = &result.Grows{Unit: z.plan.Units[z.grower.unit].Name, Count: z.grower.count, Step: z.grower.step}
		}
		z.rule()
		z.spread = z.sd(z.target)
		if z.amounts() && z.now.errorDF > 0 && z.eff.reason == "" {
			z.judge()
		}
		z.explain()
	}
	z.terms()
}

// amounts puts difference, margin, half width and SD on one scale. What is missing is
// noted, and false returned when nothing can be computed without it.
func (z *sizer) amounts() bool {
	s, out := z.s, z.out
	z.diff, z.margin, z.half = math.NaN(), math.NaN(), math.NaN()
	transform := ""
	if z.r != nil && z.r.Transform != "none" {
		transform = z.r.Transform
	}
	logs := transform == "log"
	percent := len(s.SD) == 0 && s.CV != nil && !logs
	switch {
	case logs:
		z.scale = "log"
	case percent:
		z.scale = "percent"
	case transform != "":
		z.scale = "transformed"
	default:
		z.scale = "unit"
	}
	wanted := true // a difference, margin or half width is stated
	switch {
	case s.DifferencePercent != nil && logs:
		z.diff = math.Log1p(*s.DifferencePercent / 100)
	case s.DifferencePercent != nil && percent:
		z.diff = *s.DifferencePercent
	case s.DifferencePercent != nil:
		z.missing("difference_percent", prose.SizeNeeds("difference_percent", "cv"), "write cv instead of sd, or difference in the unit of the response")
		wanted = false
	case s.Difference != nil && percent:
		z.missing("difference", prose.SizeNeeds("difference", "sd"), "write sd instead of cv, or difference_percent")
		wanted = false
	case s.Difference != nil:
		z.diff = *s.Difference
	}
	if s.Margin != nil {
		z.margin = *s.Margin
	}
	if s.HalfWidth != nil {
		z.half = *s.HalfWidth
	}
	if s.Difference == nil && s.DifferencePercent == nil && s.Margin == nil && s.HalfWidth == nil {
		if s.Basis != "" && s.Basis != "error df" {
			z.missing("", prose.SizeMissing([]string{"difference", "margin", "half_width"}), "")
		}
		wanted = false
	}
	if z.spread.why != "" {
		if s.Basis != "" && s.Basis != "error df" || len(s.SD) > 0 || s.CV != nil {
			z.missing("sd", z.spread.why, "")
		}
		return false
	}
	out.SD = result.Number(z.spread.value)
	out.Scale = z.scale
	number := func(to *result.Number, x float64) {
		if !math.IsNaN(x) {
			*to = result.Number(x)
		}
	}
	number(&out.Difference, z.diff)
	number(&out.Margin, z.margin)
	number(&out.WishedHalf, z.half)
	return wanted || len(s.SD) > 0 || s.CV != nil
}

// test is the test that the size is judged by, with the error df of a setting.
func (z *sizer) test(errorDF int) power.Test {
	t := power.Test{Kind: power.F, Alpha: z.alpha, Sides: z.sides, DF1: float64(z.target.df), DF: float64(errorDF)}
	switch {
	case !math.IsNaN(z.margin):
		t.Kind, t.Margin = power.Equivalence, z.margin
	case z.target.contrast != nil || z.target.df == 1 && z.sides == 1:
		t.Kind = power.T
	}
	return t
}

// sed is the standard error of the target's difference in a setting, for an SD.
func (z *sizer) sed(x *setting, sd float64) float64 { return sd * math.Sqrt(x.variance/z.eff.value) }

// power is the power in a setting at a difference and an SD; NaN without a difference to
// be found. Equivalence without a stated difference is of means that are equal.
func (z *sizer) power(x *setting, difference, sd float64) float64 {
	if math.IsNaN(difference) {
		if math.IsNaN(z.margin) {
			return math.NaN()
		}
		difference = 0
	}
	return z.test(x.errorDF).Power(difference, z.sed(x, sd))
}

func (z *sizer) halfWidth(x *setting, sd float64) float64 {
	return power.HalfWidth(z.alpha, z.sides, float64(x.errorDF), z.sed(x, sd))
}

// wished is the power that is wished for, or the usual one.
func (z *sizer) wished() float64 {
	if z.wish > 0 {
		return z.wish
	}
	return usualPower
}

// reached tells whether a setting does what the size is chosen for, at an SD; known is
// false where nothing is wished for.
func (z *sizer) reached(x *setting, sd float64) (yes, known bool) {
	switch {
	case z.s.Basis == "error df":
		return x.errorDF >= z.trial.Protocol.Analysis.ErrorDFMin, true
	case z.s.Basis == "precision" || math.IsNaN(z.diff) && math.IsNaN(z.margin):
		if math.IsNaN(z.half) {
			return false, false
		}
		return z.halfWidth(x, sd) <= z.half, true
	case z.wish == 0:
		return false, false
	}
	return z.power(x, z.diff, sd) >= z.wish, true
}

// judge computes power and precision and what would reach them.
func (z *sizer) judge() {
	out, sd := z.out, z.spread.value
	now := z.now
	t := z.test(now.errorDF)
	se := z.sed(now, sd)
	switch {
	case z.s.Basis == "precision":
		out.Method = "half width"
	case t.Kind == power.Equivalence:
		out.Method = "two one-sided t"
	case t.Kind == power.T:
		out.Method = "noncentral t"
	default:
		out.Method = "noncentral F"
	}
	out.SED = result.Number(se)
	out.HalfWidth = result.Number(z.halfWidth(now, sd))
	out.Power = result.Number(z.power(now, z.diff, sd))
	at := z.diff
	if math.IsNaN(at) {
		at = 0
	}
	out.Detectable = result.Number(t.Detectable(z.wished(), se, at))
	needed := z.grower.first(func(x *setting) bool { yes, _ := z.reached(x, sd); return yes })
	z.does, z.known = z.reached(now, sd)
	if z.does && z.grower.step > 0 && (needed == nil || now.units < needed.units) {
		needed = now // of unequal replication, beside those that were tried
	}
	if z.known {
		out.Needed = z.needed(needed)
		out.WithLosses = z.needed(z.withLosses(needed))
		if needed == nil && !z.does && z.grower.step > 0 {
			z.note("size-unreached", prose.SizeUnreached(z.plan, z.grower.unit))
		}
	}
	settings := z.curve(sd, needed)
	if !math.IsNaN(z.diff) {
		for k := 1; k <= 8; k++ {
			d := z.diff * float64(k) / 4
			out.ByDifference = append(out.ByDifference, result.DifferencePower{Difference: result.Number(d), Power: result.Number(z.power(now, d, sd))})
		}
	}
	for _, share := range []float64{0.75, 1, 1.25} {
		x := result.SDPower{SD: result.Number(sd * share), Power: result.Number(z.power(now, z.diff, sd*share)), Curve: []result.Number{}}
		for _, at := range settings {
			x.Curve = append(x.Curve, result.Number(z.power(at, z.diff, sd*share)))
		}
		if _, known := z.reached(now, sd); known {
			if first := z.grower.first(func(x *setting) bool { yes, _ := z.reached(x, sd*share); return yes }); first != nil {
				x.Replicates = first.replicates
			}
		}
		out.BySD = append(out.BySD, x)
	}
	z.groups()
}

// withLosses is the setting that is left with the needed replicates after the losses that
// are expected, r′ = ⌈r/(1 − q)⌉; nil where none are.
func (z *sizer) withLosses(needed *setting) *setting {
	q := z.s.Attrition
	if q == nil || *q <= 0 || needed == nil {
		return nil
	}
	// What rounding leaves over a whole number is none.
	z.losses = int(math.Ceil(float64(needed.replicates)/(1-*q) - 1e-9))
	return z.grower.first(func(x *setting) bool { return x.replicates >= z.losses })
}

// needed words a setting as a result.
func (z *sizer) needed(x *setting) *result.Needed {
	n := plain(x)
	if n != nil {
		n.Power, n.HalfWidth = result.Number(z.power(x, z.diff, z.spread.value)), result.Number(z.halfWidth(x, z.spread.value))
	}
	return n
}

// rule finds the smallest replication that leaves the wished error df.
func (z *sizer) rule() {
	least := z.trial.Protocol.Analysis.ErrorDFMin
	first := z.grower.first(func(x *setting) bool { return x.errorDF >= least })
	z.out.ErrorDFRule = plain(first)
	if z.s.Basis == "error df" {
		z.does, z.known = z.now.errorDF >= least, true
		z.out.Method = "error df"
		z.out.Needed, z.out.WithLosses = plain(first), plain(z.withLosses(first))
	}
}

// plain is a setting as a result, without power, which is not known yet.
func plain(x *setting) *result.Needed {
	if x == nil {
		return nil
	}
	return &result.Needed{Replicates: x.replicates, Count: x.count, Units: x.units, Animals: x.animals, ErrorDF: x.errorDF, Power: result.NaN, HalfWidth: result.NaN}
}

// curve is power by replication, from the smallest that leaves an error to half as much
// again as is planned or needed. It returns the settings of its points.
func (z *sizer) curve(sd float64, needed *setting) []*setting {
	if math.IsNaN(z.diff) && math.IsNaN(z.margin) && math.IsNaN(z.half) {
		return nil
	}
	var out []*setting
	last := max(z.grower.index(z.now.count), 0)
	if needed != nil {
		last = max(last, z.grower.index(needed.count))
	}
	last = last + last/2 + 2
	const most = 24
	stride := (last + most) / most
	keep := []int{z.grower.index(z.now.count)}
	if needed != nil {
		keep = append(keep, z.grower.index(needed.count))
	}
	seen := -1
	for j := 0; j <= last; j++ {
		if j%stride != 0 && !slices.Contains(keep, j) {
			continue
		}
		x := z.grower.at(j)
		if x == nil || x.replicates <= seen {
			continue
		}
		if x.replicates == z.now.replicates {
			x = z.now // which may have some treatments once more
		}
		seen = x.replicates
		out = append(out, x)
		z.out.Curve = append(z.out.Curve, result.PowerPoint{
			Replicates: x.replicates, ErrorDF: x.errorDF, Count: x.count,
			Power: result.Number(z.power(x, z.diff, sd)), HalfWidth: result.Number(z.halfWidth(x, sd)),
		})
	}
	return out
}

// groups compares more units with more animals in each, where the SD is made of both.
func (z *sizer) groups() {
	if z.spread.inside == 0 || math.IsNaN(z.diff) && math.IsNaN(z.margin) && math.IsNaN(z.half) {
		return
	}
	m := z.spread.per
	var sizes []float64
	for _, share := range []float64{0.5, 1, 1.5, 2} {
		if x := math.Round(m * share); x >= 1 && !slices.Contains(sizes, x) {
			sizes = append(sizes, x)
		}
	}
	row := func(x *setting, per float64) {
		sd := math.Sqrt(z.spread.between + z.spread.inside/per)
		g := result.GroupPower{Replicates: x.replicates, PerUnit: result.Number(per), SD: result.Number(sd), Power: result.Number(z.power(x, z.diff, sd)), HalfWidth: result.Number(z.halfWidth(x, sd))}
		if math.IsInf(per, 1) {
			g.PerUnit = result.NaN
		} else {
			g.Animals = int(math.Round(per * float64(x.units)))
		}
		z.out.Groups = append(z.out.Groups, g)
	}
	at := max(z.grower.index(z.now.count), 0)
	for _, per := range sizes {
		row(z.now, per)
	}
	row(z.now, math.Inf(1))
	if z.grower.step == 0 {
		return
	}
	done := z.now.replicates
	for _, j := range []int{at + 1, at + 2, 2*at + 1} { // at + 1 steps now, twice as many
		if x := z.grower.at(j); x != nil && x.replicates > done {
			done = x.replicates
			row(x, m)
		}
	}
}

// explain notes what the numbers stand on.
func (z *sizer) explain() {
	out, p := z.out, z.plan
	if out.ErrorDF == nil {
		z.missing("term", prose.SizeNoError(p, z.target.name), "")
	} else if z.now.errorDF < 1 {
		z.missing("term", prose.SizeNoDF(p, z.target.name), "")
	}
	if z.eff.reason != "" && z.now.errorDF > 0 {
		z.missing("", z.eff.reason, "")
	}
	if z.s.Basis != "" && z.s.Term == "" && z.s.Contrast == "" && len(p.Terms) > 1 {
		z.note("size-first-term", prose.SizeFirstTerm(p, z.target.name))
	}
	if n := len(z.covariates()); n > 0 && out.ErrorDF != nil {
		z.note("size-covariates", prose.SizeCovariates(n))
	}
	if z.eff.reason == "" && z.eff.value < 1-1e-9 {
		z.note("size-efficiency", prose.SizeEfficiency(z.eff.value, z.eff.how))
	}
	if z.spread.why == "" && z.spread.text != "" {
		z.note("size-sd", z.spread.text)
	}
	if z.scale == "percent" && out.SD.Known() {
		z.note("size-scale", prose.SizePercent())
	}
	if z.scale == "transformed" && out.SD.Known() {
		z.note("size-scale", prose.SizeTransformed(z.r.Transform))
	}
	if z.scale == "log" && out.SD.Known() {
		z.note("size-scale", prose.SizeLog(z.s.CV != nil))
	}
	if z.s.Sides == 1 && z.target.contrast == nil && z.target.df > 1 && math.IsNaN(z.margin) {
		z.note("size-sides", prose.SizeSides(p, z.target.name))
	}
	if z.r != nil && out.Power.Known() && (z.r.Kind != "continuous" || z.r.Method == "ranks") {
		z.note("size-normal", prose.SizeNormal(z.r))
	}
	if z.grower.step == 0 {
		z.note("size-fixed", prose.SizeFixed(p, z.grower.unit))
	}
	if z.short() {
		pos := z.trial.Protocol.Pos("sample_size")
		z.list.Add(diag.Diagnostic{Pos: pos, Key: "sample_size", Severity: diag.Warning, Code: sizeShort,
			Message: lowerStart(strings.TrimSuffix(prose.SizeCheck(p, out, z.does), ".")), Hint: prose.SizeHint(out)})
	}
}

// short tells whether the plan does not hold what is wished of it, or with the losses that
// are expected will not.
func (z *sizer) short() bool {
	return z.known && (!z.does || z.out.Replicates < z.losses)
}

// checks are the findings on size for the checks of the design.
func (z *sizer) checks() []result.Check {
	c := result.Check{Code: sizeCheck, Level: "pass", Where: z.trial.Protocol.Pos("sample_size").String(), Reason: prose.SizeReason()}
	switch {
	case z.known:
		if z.short() {
			c.Level = "warning"
		}
		c.Text = prose.SizeCheck(z.plan, z.out, z.does)
	case z.s.Basis == "power" || z.s.Basis == "precision":
		c.Level, c.Text = "warning", prose.SizeUnknown(z.s.Basis)
	default:
		return nil
	}
	return []result.Check{c}
}

// terms tells for every treatment term what the plan gives: replicates, error df, and the
// difference that the wished power, or the usual one, detects.
func (z *sizer) terms() {
	out := z.out
	for i := range z.plan.Terms {
		t := &z.plan.Terms[i]
		tg := target{name: t.Name, unit: t.Unit, term: i, df: t.DF, rep: -1, order: len(t.Factors)}
		e := z.efficiency(tg)
		x := (&sizer{trial: z.trial, plan: z.plan, r: z.r, target: tg, eff: e}).setting(z.plan)
		row := result.TermPower{
			Term: t.Name, Unit: z.plan.Units[t.Unit].Name, Replicates: x.replicates, DF: t.DF,
			SD: result.NaN, Efficiency: result.NaN, Detectable: result.NaN, DetectableSD: result.NaN,
		}
		if x.errorDF >= 0 {
			df := x.errorDF
			row.ErrorDF = &df
		}
		if e.reason == "" {
			row.Efficiency = result.Number(e.value)
			if x.errorDF > 0 {
				f := power.Test{Kind: power.F, Alpha: z.alpha, DF1: float64(t.DF), DF: float64(x.errorDF)}
				row.DetectableSD = result.Number(f.Detectable(z.wished(), math.Sqrt(x.variance/e.value), 0))
			}
		}
		// A single SD is that of the unit of the size's own term.
		single := len(z.s.SD) == 0 || len(z.s.SD) == 1 && z.s.SD[0].Stratum == ""
		if sd := z.sd(tg); sd.why == "" && out.SD.Known() && (!single || z.sameError(tg)) {
			row.SD = result.Number(sd.value)
			row.Detectable = row.SD * row.DetectableSD
		}
		out.Terms = append(out.Terms, row)
	}
}

// sameError tells whether a term is tested over the error of the size's own target.
func (z *sizer) sameError(t target) bool {
	if z.target.rep >= 0 || z.target.term < 0 || z.target.unit != t.unit {
		return false
	}
	return z.plan.Terms[t.term].Over < 0 && z.plan.Terms[z.target.term].Over < 0 || z.target.term == t.term
}

// covariates are those that the response is adjusted for; each takes one degree of
// freedom of the error.
func (z *sizer) covariates() []string {
	if z.r == nil {
		return nil
	}
	return z.r.Covariates
}
