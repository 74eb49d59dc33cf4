package render

import (
	"math"
	"slices"
	"strings"

	"penwright/analysis/dataset"
	"penwright/analysis/num"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/render/doc"
	"penwright/render/figure"
)

// pictures draws the figures of a trial from its parts and results.
type pictures struct {
	trial *trial.Trial
	rs    *result.Results
}

func (v *pictures) response(name string) *result.Response {
	for i := range v.rs.Responses {
		if v.rs.Responses[i].Name == name {
			return &v.rs.Responses[i]
		}
	}
	return nil
}

func (v *pictures) table(name string) *dataset.Response {
	if v.trial.Table == nil {
		return nil
	}
	for i := range v.trial.Table.Responses {
		if v.trial.Table.Responses[i].Protocol.Name == name {
			return &v.trial.Table.Responses[i]
		}
	}
	return nil
}

func figureOf(id, caption, file string, draw func() (*doc.Picture, string)) []doc.Block {
	pic, alt := draw()
	if pic == nil {
		return nil
	}
	return []doc.Block{doc.Figure{ID: id, Caption: []doc.Inline{doc.Text{Text: caption}}, Alt: alt, Picture: pic, File: file}}
}

// treatments lists the treatments of the smallest treated unit and the index of each
// instance's.
func (v *pictures) treatments(unit int) (names []string, of func(instance int) int) {
	if v.trial.Allotment == nil || unit < 0 {
		return nil, func(int) int { return -1 }
	}
	names = prose.TreatmentOrder(v.trial, unit)
	rank := map[string]int{}
	for i, n := range names {
		rank[n] = i
	}
	return names, func(i int) int { return rank[prose.TreatmentText(v.trial, unit, i)] }
}

// layoutMap shows the units with what each received.
func (v *pictures) layoutMap() []doc.Block {
	p := v.trial.Plan
	unit := allot.RowUnit(p)
	names, of := v.treatments(unit)
	out := v.excluded("")
	lost := v.without(unit)
	// Where the larger units that hold a unit bear what they received, it bears only its own.
	own := v.nested(unit)
	rank := map[string]int{}
	if own {
		names = v.ownNames(unit)
		for i, n := range names {
			rank[n] = i
		}
	}
	m := figure.FromPlan(p, func(u, i int) figure.Look {
		l := figure.Look{Treatment: -1, Value: math.NaN(), Excluded: out(u, i), Lost: u == unit && lost != nil && lost[i]}
		switch {
		case v.trial.Allotment == nil:
		case u != unit:
			l.Label = v.ownLevels(u, i)
		case own:
			if t, ok := rank[v.ownLevels(u, i)]; ok {
				l.Treatment, l.Label = t, names[t]
			}
		default:
			if name := names[of(i)]; name != prose.UnknownTreatment {
				l.Treatment, l.Label = of(i), name
			}
		}
		return l
	})
	m.Treatments = told(names, nil)
	caption := "Layout of the trial with the allotment"
	switch {
	case v.trial.Allotment == nil:
		caption = "Layout of the trial; treatments have not been drawn"
	case own:
		m.What = "level"
		caption += "; what a larger unit received stands beside its name"
	}
	return figureOf("figure-map", caption, "map", m.Draw)
}

// nested says whether a unit receives something itself, and the other treated units that
// it lies in are all boxes around it on a map.
func (v *pictures) nested(unit int) bool {
	p := v.trial.Plan
	if v.trial.Allotment == nil || unit < 0 || len(p.Units[unit].Receives) == 0 {
		return false
	}
	around := map[int]bool{}
	for u := p.Units[unit].Within; u >= 0; u = p.Units[u].Within {
		around[u] = true
	}
	larger := false
	for u := range p.Units {
		if u != unit && p.Coarse(unit, u) != nil && len(p.Units[u].Receives) > 0 {
			// Of very many boxes not all have room for their names.
			if larger = true; !around[u] || p.Units[u].N > 80 {
				return false
			}
		}
	}
	return larger
}

// ownNames lists what a unit itself received, in the order of the levels.
func (v *pictures) ownNames(unit int) []string {
	p := v.trial.Plan
	type entry struct {
		key  []int32
		name string
	}
	seen := map[string]bool{"": true}
	var all []entry
	for i := range p.Units[unit].N {
		name := v.ownLevels(unit, i)
		if seen[name] {
			continue
		}
		seen[name] = true
		e := entry{name: name}
		for f := range p.Factors {
			if levels := v.trial.Allotment.Levels[f]; p.Factors[f].Unit == unit && levels != nil {
				e.key = append(e.key, levels[i])
			}
		}
		all = append(all, e)
	}
	slices.SortStableFunc(all, func(a, b entry) int { return slices.Compare(a.key, b.key) })
	names := make([]string, len(all))
	for i, e := range all {
		names[i] = e.name
	}
	return names
}

// excluded says of an instance of a unit whether it, or a larger unit that holds it, was
// excluded: for a response, or where that is empty from all of them.
func (v *pictures) excluded(response string) func(unit, instance int) bool {
	p := v.trial.Plan
	type instance struct{ unit, at int }
	out := map[instance]bool{}
	finder := allot.NewFinder(p)
	for _, e := range v.trial.Protocol.Exclusions {
		all := len(e.Responses) == 0 || response != "" && contains(e.Responses, response)
		if response == "" && !all {
			all = true
			for i := range v.trial.Protocol.Responses {
				all = all && contains(e.Responses, v.trial.Protocol.Responses[i].Name)
			}
		}
		if e.At == "" && all {
			if u, i, bad := finder.Unit(e.Unit); bad == nil {
				out[instance{u, int(i)}] = true
			}
		}
	}
	return func(unit, i int) bool {
		if len(out) == 0 {
			return false
		}
		for u := range p.Units {
			if up := p.Coarse(unit, u); up != nil && out[instance{u, int(up[i])}] {
				return true
			}
		}
		return false
	}
}

// without says which instances of a unit have no value of any response that was recorded
// on it or within it; nil where there are no data.
func (v *pictures) without(unit int) []bool {
	if v.trial.Table == nil || unit < 0 {
		return nil
	}
	p := v.trial.Plan
	var lost []bool
	for k := range v.trial.Table.Responses {
		data := &v.trial.Table.Responses[k]
		up := p.Coarse(data.Unit, unit)
		if up == nil {
			continue
		}
		if lost == nil {
			lost = make([]bool, p.Units[unit].N)
			for i := range lost {
				lost[i] = true
			}
		}
		for i, value := range data.Value {
			if !math.IsNaN(value) {
				lost[up[data.Instance[i]]] = false
			}
		}
	}
	return lost
}

// ownLevels names what a unit itself received.
func (v *pictures) ownLevels(unit, instance int) string {
	p := v.trial.Plan
	var parts []string
	for f := range p.Factors {
		if p.Factors[f].Unit != unit || v.trial.Allotment.Levels[f] == nil {
			continue
		}
		if l := v.trial.Allotment.Levels[f][instance]; l >= 0 {
			parts = append(parts, prose.LevelText(p, p.Factors[f].Name, p.Factors[f].Levels[l]))
		}
	}
	return strings.Join(parts, ", ")
}

// cells groups the rows of a response's data by treatment with the block of each.
type cellRows struct {
	names  []string
	of     []int    // treatment of each row
	blocks []string // block of each row; empty: none
	units  []string
	block  string // what the blocks are called
	means  bool   // a block holds several units of a treatment
}

// atMostOnce says whether no block holds two of the instances with one treatment, and one holds
// two treatments.
func atMostOnce(block []int32, instances []int32, of func(int) int) bool {
	seen, first := map[[2]int]bool{}, map[int]int{}
	several := false
	for _, i := range instances {
		b, t := int(block[i]), of(int(i))
		if seen[[2]int{b, t}] {
			return false
		}
		seen[[2]int{b, t}] = true
		if x, ok := first[b]; ok && x != t {
			several = true
		}
		first[b] = t
	}
	return several
}

// groupRows finds treatment, block and name of the instances of a unit.
func (v *pictures) groupRows(unit int, instances []int32) cellRows {
	p := v.trial.Plan
	var out cellRows
	names, of := v.treatments(unit)
	// The block is the coarsest unit that received nothing and holds a treatment at most
	// once, so that a line has one unit at each; else the coarsest of several that received
	// nothing.
	block, single := -1, false
	for _, s := range p.Strata {
		u := &p.Units[s.Unit]
		to := p.Coarse(unit, s.Unit)
		if single || s.Unit == unit || to == nil || len(u.Receives) > 0 || u.Own == nil || u.N < 2 {
			continue
		}
		if single = atMostOnce(to, instances, of); block < 0 || single {
			block = s.Unit
		}
	}
	out.means = block >= 0 && !single
	if block >= 0 {
		out.block = prose.UnitName(&p.Units[block])
	}
	for _, i := range instances {
		out.of = append(out.of, of(int(i)))
		out.units = append(out.units, allot.Describe(p, unit, i))
		b := ""
		if block >= 0 {
			b = p.Units[block].Own[p.Coarse(unit, block)[i]]
		}
		out.blocks = append(out.blocks, b)
	}
	out.names = told(names, out.of)
	return out
}

// told is names without the last where that is no treatment and none of the indices used.
func told(names []string, used []int) []string {
	if last := len(names) - 1; last >= 0 && names[last] == prose.UnknownTreatment && !slices.Contains(used, last) {
		return names[:last]
	}
	return names
}

// joined says what lines join.
func (g cellRows) joined() string {
	switch {
	case g.block == "":
		return ""
	case g.means:
		return "; lines join the means of each " + g.block
	}
	return "; lines join the units of each " + g.block
}

// points shows the data of a response by treatment with blocks joined.
func (v *pictures) points(name string) []doc.Block {
	r, data := v.response(name), v.table(name)
	if r == nil || data == nil || v.trial.Allotment == nil {
		return nil
	}
	p := v.trial.Plan
	unit := v.treatedUnit(data.Unit)
	up := p.Coarse(data.Unit, unit)
	// Smaller units are shown by the mean of their experimental unit.
	sum, n, excluded := make([]float64, p.Units[unit].N), make([]int, p.Units[unit].N), make([]bool, p.Units[unit].N)
	for i, s := range data.Status {
		if (s != dataset.Used && s != dataset.Excluded && s != dataset.CovariateMissing) || math.IsNaN(data.Value[i]) {
			continue
		}
		u := up[data.Instance[i]]
		if s == dataset.Excluded {
			excluded[u] = true
		}
		sum[u] += data.Value[i]
		n[u]++
	}
	var instances []int32
	for u := range n {
		if n[u] > 0 {
			instances = append(instances, int32(u))
		}
	}
	g := v.groupRows(unit, instances)
	if data.Time != nil {
		if out := v.pointsOverTime(r, data, unit, instances, g); out != nil {
			return out
		}
	}
	fig := figure.Points{Response: axis(r), By: v.treatmentTitle(unit), Blocks: g.block}
	for _, x := range g.names {
		fig.Groups = append(fig.Groups, figure.Group{Label: x, Mean: math.NaN()})
	}
	total, count := make([]float64, len(g.names)), make([]int, len(g.names))
	crosses := false
	for k, u := range instances {
		crosses = crosses || excluded[u]
		value := sum[u] / float64(n[u])
		t := g.of[k]
		fig.Groups[t].Points = append(fig.Groups[t].Points, figure.Point{Unit: g.units[k], Block: g.blocks[k], Value: value, Excluded: excluded[u]})
		if !excluded[u] {
			total[t] += value
			count[t]++
		}
	}
	for t := range total {
		if count[t] > 0 {
			fig.Groups[t].Mean = total[t] / float64(count[t])
		}
	}
	caption := "Data: " + prose.ResponseText(r) + " of each " + prose.UnitName(&p.Units[unit]) + " by treatment"
	caption += g.joined()
	caption += ". Bars: treatment means."
	if crosses {
		caption += " Crosses: excluded from the analysis and from the means."
	}
	return figureOf("figure-points-"+name, caption, "points-"+name, fig.Draw)
}

// times are those at which a response is measured on the same unit; nil: once.
func (v *pictures) times(name string) *protocol.Repeated {
	if r := v.trial.Protocol.Response(name); r != nil {
		return v.trial.Protocol.RepeatedNamed(r.Repeated)
	}
	return nil
}

// mostProfiles is the number of treatments by times up to which each has a place of its own
// in a picture of the data.
const mostProfiles = 60

// pointsOverTime shows the data of a repeated response by treatment and time, with the
// records of each unit joined; nil where there are too many of them.
func (v *pictures) pointsOverTime(r *result.Response, data *dataset.Response, unit int, instances []int32, g cellRows) []doc.Block {
	p, rep := v.trial.Plan, v.times(r.Name)
	if rep == nil || len(g.names)*len(rep.At) > mostProfiles {
		return nil
	}
	up := p.Coarse(data.Unit, unit)
	type record struct{ unit, time int32 }
	sum, n, excluded := map[record]float64{}, map[record]int{}, map[record]bool{}
	for i, s := range data.Status {
		if (s != dataset.Used && s != dataset.Excluded && s != dataset.CovariateMissing) || math.IsNaN(data.Value[i]) {
			continue
		}
		k := record{unit: up[data.Instance[i]], time: data.Time[i]}
		sum[k] += data.Value[i]
		n[k]++
		excluded[k] = excluded[k] || s == dataset.Excluded
	}
	title := prose.FactorHead(p, rep.Name)
	if t := v.treatmentTitle(unit); t != "" {
		title = t + ", " + title
	}
	fig := figure.Points{Response: axis(r), By: title, Blocks: prose.UnitName(&p.Units[unit])}
	crosses := false
	for t, name := range g.names {
		for at, time := range rep.At {
			group := figure.Group{Label: time, Mean: math.NaN()}
			if len(g.names) > 1 {
				group.Label = name + ", " + time
			}
			total, count := 0.0, 0
			for k, u := range instances {
				x := record{unit: u, time: int32(at)}
				if g.of[k] != t || n[x] == 0 {
					continue
				}
				value := sum[x] / float64(n[x])
				group.Points = append(group.Points, figure.Point{Unit: g.units[k], Block: g.units[k], Value: value, Excluded: excluded[x]})
				crosses = crosses || excluded[x]
				if !excluded[x] {
					total += value
					count++
				}
			}
			if count > 0 {
				group.Mean = total / float64(count)
			}
			fig.Groups = append(fig.Groups, group)
		}
	}
	name := prose.UnitName(&p.Units[unit])
	caption := "Data: " + prose.ResponseText(r) + " of each " + name + " by treatment and " + prose.TermText(p, rep.Name) + "; lines join the records of each " + name + ". Bars: means."
	if crosses {
		caption += " Crosses: excluded from the analysis and from the means."
	}
	return figureOf("figure-points-"+r.Name, caption, "points-"+r.Name, fig.Draw)
}

// residualsOverTime shows the residuals of a repeated response by time, with those of each
// unit joined.
func (v *pictures) residualsOverTime(r *result.Response, rep *protocol.Repeated) []doc.Block {
	p := v.trial.Plan
	fig := figure.Points{Response: "Residual", By: prose.FactorHead(p, rep.Name), Blocks: prose.TermText(p, rep.On), Residual: true}
	if r.Unit != "" {
		fig.Response += " (" + num.UnitText(r.Unit) + ")"
	}
	place := map[string]int{}
	for i, l := range rep.At {
		fig.Groups = append(fig.Groups, figure.Group{Label: l, Mean: math.NaN()})
		place[l] = i
	}
	shown := false
	for _, x := range r.Residuals {
		i, ok := place[x.Units.Of(rep.Name)]
		if !ok {
			continue
		}
		var of result.Levels
		for _, u := range x.Units {
			if u.Factor != rep.Name {
				of = append(of, u)
			}
		}
		unit := prose.UnitText(p, of)
		fig.Groups[i].Points = append(fig.Groups[i].Points, figure.Point{Unit: unit, Block: unit, Value: float64(x.Residual)})
		shown = true
	}
	if !shown {
		return nil
	}
	return figureOf("figure-residuals-"+r.Name, "Residuals of "+prose.ResponseText(r)+" by "+prose.TermText(p, rep.Name)+"; lines join the records of each "+prose.TermText(p, rep.On)+".", "residuals-"+r.Name, fig.Draw)
}

// treatedUnit is the smallest treated unit that a unit lies in.
func (v *pictures) treatedUnit(unit int) int {
	p := v.trial.Plan
	u := allot.RowUnit(p)
	if u >= 0 && p.Coarse(unit, u) != nil {
		return u
	}
	return unit
}

func (v *pictures) treatmentTitle(unit int) string {
	p := v.trial.Plan
	var names []string
	for i := range p.Factors {
		f := &p.Factors[i]
		if f.Unit >= 0 && p.Coarse(unit, f.Unit) != nil {
			names = append(names, prose.FactorLabel(f))
		}
	}
	return strings.Join(names, ", ")
}

// axis titles an axis of values.
func axis(r *result.Response) string {
	s := r.Label
	if s == "" {
		s = strings.ReplaceAll(r.Name, "_", " ")
	}
	if r.Unit != "" {
		s += " (" + num.UnitText(r.Unit) + ")"
	}
	return s
}

// means shows the means of a term with intervals, or the lines of an interaction.
func (v *pictures) means(name, term string) []doc.Block {
	r := v.response(name)
	if r == nil {
		return nil
	}
	p := v.trial.Plan
	var ms []result.Mean
	for _, m := range r.Means {
		if m.Term == term {
			ms = append(ms, m)
		}
	}
	if len(ms) < 2 || len(ms) > 120 {
		return nil
	}
	id := "figure-means-" + name + "-" + strings.ReplaceAll(term, ":", "-")
	file := "means-" + name + "-" + strings.ReplaceAll(term, ":", "-")
	switch len(ms[0].Levels) {
	case 1:
		f := ms[0].Levels[0].Factor
		fig := figure.Means{Response: axis(r), By: prose.FactorHead(p, f), Interval: prose.Interval(p, r)}
		var doses []float64
		if x := prose.FactorNamed(p, f); x != nil {
			doses = x.Values
		}
		fig.Dose = doses != nil
		for i, m := range ms {
			x := figure.Mean{Label: m.Levels[0].Level, Value: float64(m.Mean), Low: float64(m.Lower), High: float64(m.Upper)}
			if m.Letters != nil {
				x.Letters = *m.Letters
			}
			if i < len(doses) {
				x.X = doses[i]
			}
			fig.Means = append(fig.Means, x)
		}
		caption := prose.MeansCaption(p, r, term) + ", with " + prose.Interval(p, r) + " of each mean."
		if text := prose.Letters(p, r, term); text != "" {
			caption += " " + text
		}
		if fig.Trend = trend(p, r, term, fig.Means); len(fig.Trend.Points) > 0 {
			caption += " The line is the " + fig.Trend.Label + ", as planned."
		}
		return figureOf(id, caption, file, fig.Draw)
	case 2:
		a, b := ms[0].Levels[0].Factor, ms[0].Levels[1].Factor
		// A graded factor runs along the axis; else the one with more levels does.
		along, over := 1, 0
		var values [2][]float64
		for k, name := range []string{a, b} {
			if x := prose.FactorNamed(p, name); x != nil {
				values[k] = x.Values
			}
		}
		var levels [2][]string
		for _, m := range ms {
			for k := range 2 {
				if l := m.Levels[k].Level; !contains(levels[k], l) {
					levels[k] = append(levels[k], l)
				}
			}
		}
		if p.Protocol.RepeatedNamed(a) != nil || p.Protocol.RepeatedNamed(b) == nil && (values[0] != nil && values[1] == nil || values[0] == nil && values[1] == nil && len(levels[0]) > len(levels[1])) {
			along, over = 0, 1
		}
		// Over time few lines are shown with the limits of each mean.
		timed := p.Protocol.RepeatedNamed(ms[0].Levels[along].Factor) != nil && len(levels[over]) <= 6
		fig := figure.Interaction{Response: axis(r), By: prose.FactorHead(p, ms[0].Levels[along].Factor), Levels: levels[along], X: values[along], Over: prose.FactorHead(p, ms[0].Levels[over].Factor)}
		for _, l := range levels[over] {
			line := figure.Line{Label: l}
			for _, x := range levels[along] {
				y, lo, hi := math.NaN(), math.NaN(), math.NaN()
				for _, m := range ms {
					if m.Levels[over].Level == l && m.Levels[along].Level == x {
						y, lo, hi = float64(m.Mean), float64(m.Lower), float64(m.Upper)
					}
				}
				line.Values = append(line.Values, y)
				if timed {
					line.Low, line.High = append(line.Low, lo), append(line.High, hi)
				}
			}
			fig.Lines = append(fig.Lines, line)
		}
		for _, s := range r.SED {
			if s.Term == term && s.Mean.Known() && !timed {
				fig.Bar, fig.BarLabel = float64(s.Mean), "SED"
				if float64(s.Max-s.Min) > 1e-9*float64(s.Max) {
					fig.BarLabel = "mean SED"
				}
			}
		}
		caption := prose.MeansCaption(p, r, term) + "."
		if timed {
			caption = strings.TrimSuffix(caption, ".") + ", with " + prose.Interval(p, r) + " of each mean."
		}
		switch fig.BarLabel {
		case "SED":
			caption += " The bar is the standard error of a difference (SED)."
		case "mean SED":
			caption += " The bar is the mean standard error of a difference (SED)."
		}
		return figureOf(id, caption, file, fig.Draw)
	}
	return nil
}

// mostDifferences is how many differences a picture shows; more are read in their table.
const mostDifferences = 21 // all pairs of seven means, or twenty against one

// differences shows the differences between the means of a term with their limits.
func (v *pictures) differences(name, term string) []doc.Block {
	r := v.response(name)
	if r == nil {
		return nil
	}
	p := v.trial.Plan
	limits := prose.DifferenceLimits(p, r, term)
	fig := figure.Differences{Response: "Difference", Interval: limits}
	if r.Unit != "" {
		fig.Response += " (" + num.UnitText(r.Unit) + ")"
	}
	level := func(c result.Comparison, s string) string {
		// Where one factor of the term is not held, the levels are its.
		free := ""
		for _, f := range strings.Split(term, ":") {
			if c.At.Of(f) == "" {
				if free != "" {
					return strings.ReplaceAll(s, ":", ", ")
				}
				free = f
			}
		}
		return prose.LevelText(p, free, s)
	}
	for _, c := range r.Comparisons {
		if c.Term == term {
			fig.Rows = append(fig.Rows, figure.Difference{At: prose.LevelsText(p, c.At), A: level(c, c.A), B: level(c, c.B),
				Value: float64(c.Difference), Low: float64(c.Lower), High: float64(c.Upper)})
		}
	}
	// One difference is soon read, and without limits a picture says no more than the table.
	if limits == "" || len(fig.Rows) < 2 || len(fig.Rows) > mostDifferences {
		return nil
	}
	id := name + "-" + strings.ReplaceAll(term, ":", "-")
	caption := prose.ComparisonsCaption(p, r, term) + ", with " + limits + ". A difference whose limits hold nought may be none."
	return figureOf("figure-differences-"+id, caption, "differences-"+id, fig.Draw)
}

func contains(list []string, s string) bool {
	for _, x := range list {
		if x == s {
			return true
		}
	}
	return false
}

// residualRows finds the unit and instance of every listed residual.
func (v *pictures) residualRows(r *result.Response) (unit int, instances []int32) {
	p := v.trial.Plan
	if len(r.Residuals) == 0 {
		return -1, nil
	}
	unit = -1
	index := map[string]int32{}
	for _, x := range r.Residuals {
		if unit < 0 {
			unit, _ = v.unitOf(x.Units)
			if unit < 0 {
				return -1, nil
			}
			for i := range p.Units[unit].N {
				index[v.key(unit, i)] = int32(i)
			}
		}
		var parts []string
		for _, u := range x.Units {
			parts = append(parts, u.Level)
		}
		i, ok := index[strings.Join(parts, "\x00")]
		if !ok {
			return -1, nil
		}
		instances = append(instances, i)
	}
	return unit, instances
}

// unitOf is the unit whose named units are those of a row: the coarsest one that lies
// in all of them and in no other named unit.
func (v *pictures) unitOf(names result.Levels) (int, bool) {
	p := v.trial.Plan
	best := -1
	for u := range p.Units {
		count := 0
		for w := range p.Units {
			if p.Coarse(u, w) != nil && p.Units[w].Own != nil {
				count++
			}
		}
		all := true
		for _, n := range names {
			found := false
			for w := range p.Units {
				found = found || p.Units[w].Name == n.Factor && p.Coarse(u, w) != nil
			}
			all = all && found
		}
		if all && count == len(names) && (best < 0 || p.Coarse(best, u) != nil) {
			best = u
		}
	}
	return best, best >= 0
}

func (v *pictures) key(unit, instance int) string {
	p := v.trial.Plan
	var parts []string
	for u := range p.Units {
		if up := p.Coarse(unit, u); up != nil && p.Units[u].Own != nil {
			parts = append(parts, p.Units[u].Own[up[instance]])
		}
	}
	return strings.Join(parts, "\x00")
}

// residualMap shades the layout by residual.
func (v *pictures) residualMap(name string) []doc.Block {
	r := v.response(name)
	if r == nil {
		return nil
	}
	unit, instances := v.residualRows(r)
	if unit < 0 {
		return nil
	}
	value := map[int]float64{}
	for k, i := range instances {
		value[int(i)] = float64(r.Residuals[k].Residual)
	}
	out := v.excluded(name)
	label := func(int) string { return "" }
	if names, of := v.treatments(unit); names != nil {
		label = func(i int) string { return names[of(i)] }
	}
	m := figure.FromPlan(v.trial.Plan, func(u, i int) figure.Look {
		l := figure.Look{Treatment: -1, Value: math.NaN()}
		if u == unit {
			l.Label = label(i)
			if x, ok := value[i]; ok {
				l.Value = x
			} else {
				l.Excluded = out(u, i)
				l.Lost = !l.Excluded
			}
		}
		return l
	})
	m.Shade = "Residual"
	if r.Unit != "" {
		m.Shade += " (" + num.UnitText(r.Unit) + ")"
	}
	return figureOf("figure-residual-map-"+name, "Layout shaded by residual: "+prose.ResponseText(r)+". A pattern in the shade is a pattern that the model does not hold.", "residual-map-"+name, m.Draw)
}

// residualPoints shows residuals by treatment with blocks joined.
func (v *pictures) residualPoints(name string) []doc.Block {
	r := v.response(name)
	if r == nil {
		return nil
	}
	if times := v.times(name); times != nil {
		return v.residualsOverTime(r, times)
	}
	unit, instances := v.residualRows(r)
	if unit < 0 || v.trial.Allotment == nil {
		return nil
	}
	g := v.groupRows(unit, instances)
	fig := figure.Points{Response: "Residual", By: v.treatmentTitle(unit), Blocks: g.block, Residual: true}
	if r.Unit != "" {
		fig.Response += " (" + num.UnitText(r.Unit) + ")"
	}
	for _, x := range g.names {
		fig.Groups = append(fig.Groups, figure.Group{Label: x, Mean: math.NaN()})
	}
	for k := range instances {
		t := g.of[k]
		fig.Groups[t].Points = append(fig.Groups[t].Points, figure.Point{Unit: g.units[k], Block: g.blocks[k], Value: float64(r.Residuals[k].Residual)})
	}
	return figureOf("figure-residuals-"+name, "Residuals of "+prose.ResponseText(r)+" by treatment"+g.joined()+".", "residuals-"+name, fig.Draw)
}

// fitted shows residuals against fitted values.
func (v *pictures) fitted(name string) []doc.Block {
	r := v.response(name)
	if r == nil || len(r.Residuals) == 0 {
		return nil
	}
	fig := figure.Fitted{X: "Fitted value", Y: "Studentized residual", Zero: true}
	if r.Unit != "" {
		fig.X += " (" + num.UnitText(r.Unit) + ")"
	}
	far := v.farthest(r)
	for i, x := range r.Residuals {
		fig.Points = append(fig.Points, figure.XY{Unit: prose.UnitText(v.trial.Plan, x.Units), X: float64(x.Fitted), Y: float64(x.Studentized), Named: i == far})
	}
	return figureOf("figure-fitted-"+name, "Studentized residuals against fitted values: "+prose.ResponseText(r)+".", "fitted-"+name, fig.Draw)
}

// farthest is the residual that passes the Bonferroni limit, or -1.
func (v *pictures) farthest(r *result.Response) int {
	pass := false
	for _, d := range r.Diagnostics {
		pass = pass || d.Name == "outlier" && d.P.Known() && float64(d.P) < 0.05
	}
	if !pass {
		return -1
	}
	best := -1
	for i, x := range r.Residuals {
		if x.Deleted.Known() && (best < 0 || math.Abs(float64(x.Deleted)) > math.Abs(float64(r.Residuals[best].Deleted))) {
			best = i
		}
	}
	return best
}

// spread shows one point a treatment, log SD on log mean.
func (v *pictures) spread(name string) []doc.Block {
	r := v.response(name)
	if r == nil {
		return nil
	}
	fig := figure.Spread{Response: axis(r), Slope: math.NaN()}
	sx, sy, n := 0.0, 0.0, 0.0
	for _, s := range r.Summary {
		if !s.SD.Known() || s.SD <= 0 || s.Mean <= 0 {
			continue
		}
		fig.Points = append(fig.Points, figure.Scale{Label: prose.LevelsText(v.trial.Plan, s.Levels), Mean: float64(s.Mean), SD: float64(s.SD)})
		sx, sy, n = sx+math.Log10(float64(s.Mean)), sy+math.Log10(float64(s.SD)), n+1
	}
	if len(fig.Points) < 3 {
		return nil
	}
	caption := "Standard deviation on mean, one point a treatment, both on logarithmic scales: " + prose.ResponseText(r) + "."
	for _, d := range r.Diagnostics {
		if d.Name != "spread on mean" {
			continue
		}
		// A line that the points do not clearly show is not drawn.
		if d.P.Known() && float64(d.P) < 0.05 {
			fig.Slope = float64(d.Statistic)
			fig.Intercept = sy/n - fig.Slope*sx/n
			caption += " The line rises by " + num.Fixed(fig.Slope, 1) + "; a slope of b is evened by the power 1 − b."
		}
		if d.Text != "" {
			caption += " " + d.Text
		}
	}
	return figureOf("figure-spread-"+name, caption, "spread-"+name, fig.Draw)
}

// quantiles shows ordered studentized residuals against normal scores.
func (v *pictures) quantiles(name string) []doc.Block {
	r := v.response(name)
	if r == nil {
		return nil
	}
	fig := figure.Quantiles{X: "Normal score", Y: "Studentized residual", Slope: 1, Envelope: "limits that hold an ordered normal value in 95 of 100 samples"}
	far := v.farthest(r)
	for i, x := range r.Residuals {
		if x.Score.Known() {
			fig.Points = append(fig.Points, figure.Quantile{Unit: prose.UnitText(v.trial.Plan, x.Units), Expected: float64(x.Score), Value: float64(x.Studentized),
				Low: float64(x.Lower), High: float64(x.Upper), Named: i == far})
		}
	}
	if len(fig.Points) < 3 {
		return nil
	}
	return figureOf("figure-quantiles-"+name, "Studentized residuals in order against normal scores, with the limits within which each lies in 95 of 100 normal samples: "+prose.ResponseText(r)+".", "quantiles-"+name, fig.Draw)
}

// flow shows planned, allotted, observed and analysed units of each treatment, for the
// first primary response or the first of all.
func (v *pictures) flow() []doc.Block {
	p := v.trial.Plan
	if v.trial.Allotment == nil || v.trial.Table == nil || len(v.trial.Table.Responses) == 0 {
		return nil
	}
	data := &v.trial.Table.Responses[0]
	for i := range v.trial.Table.Responses {
		if v.trial.Table.Responses[i].Protocol.Role == "primary" {
			data = &v.trial.Table.Responses[i]
			break
		}
	}
	unit := v.treatedUnit(data.Unit)
	names, of := v.treatments(unit)
	up := p.Coarse(data.Unit, unit)
	n := p.Units[unit].N
	allotted, observed, analysed := make([]int, len(names)), make([]int, len(names)), make([]int, len(names))
	seen, used, why := make([]bool, n), make([]bool, n), make([]string, n)
	for i, s := range data.Status {
		u := up[data.Instance[i]]
		if !math.IsNaN(data.Value[i]) {
			seen[u] = true
		}
		if s == dataset.Used {
			used[u] = true
		} else if why[u] == "" {
			why[u] = data.Reason[i]
		}
	}
	before, after := make([]reasons, len(names)), make([]reasons, len(names))
	for i := range n {
		t := of(i)
		allotted[t]++
		switch {
		case !seen[i]:
			before[t].add(why[i], "no value")
		case !used[i]:
			after[t].add(why[i], "not used")
		}
		if seen[i] {
			observed[t]++
		}
		if used[i] {
			analysed[t]++
		}
	}
	fig := figure.Flow{Unit: prose.UnitName(&p.Units[unit]), Stages: []string{"allotted", "observed", "analysed"}}
	for t, name := range names {
		fig.Rows = append(fig.Rows, figure.FlowRow{Label: name, Counts: []int{allotted[t], observed[t], analysed[t]}, Reasons: []string{before[t].String(), after[t].String()}})
	}
	from := "the allotment"
	if planned := v.planned(unit, names); planned != nil {
		from = "the plan"
		fig.Stages = append([]string{"planned"}, fig.Stages...)
		for t := range fig.Rows {
			r := &fig.Rows[t]
			r.Counts, r.Reasons = append([]int{planned[t]}, r.Counts...), append([]string{""}, r.Reasons...)
		}
	}
	return figureOf("figure-flow", "Flow of units from "+from+" to the analysis of "+prose.ResponseLabelText(data.Protocol)+".", "flow", fig.Draw)
}

// reasons counts why units fell away, in the order of their first appearance.
type reasons struct {
	texts  []string
	counts []int
}

func (r *reasons) add(text, otherwise string) {
	if text == "" {
		text = otherwise
	}
	for i, t := range r.texts {
		if t == text {
			r.counts[i]++
			return
		}
	}
	r.texts, r.counts = append(r.texts, text), append(r.counts, 1)
}

// String lists the reasons, with their numbers where there are several.
func (r *reasons) String() string {
	var out []string
	for i, t := range r.texts {
		if len(r.texts) > 1 {
			t += " (" + num.Count(r.counts[i]) + ")"
		}
		out = append(out, t)
	}
	return strings.Join(out, "; ")
}

// planned is how many instances of a unit were planned for each treatment; nil where the
// plan does not say by treatment.
func (v *pictures) planned(unit int, names []string) []int {
	p := v.trial.Plan
	combinations := 1
	equal := true
	treated := 0
	for u := range p.Units {
		a := p.Allocation(u)
		if a == nil || p.Coarse(unit, u) == nil {
			continue
		}
		treated++
		if a.Separate {
			for _, f := range a.Factors {
				combinations *= len(p.Factors[f].Levels)
			}
			continue
		}
		combinations *= len(a.Combinations)
		for _, k := range a.Total {
			equal = equal && k == a.Total[0]
		}
	}
	out := make([]int, len(names))
	if a := p.Allocation(unit); treated == 1 && a != nil && !a.Separate && len(a.Total) == len(a.Combinations) {
		at := map[string]int{}
		for c, levels := range a.Combinations {
			var parts []string
			for f := range p.Factors {
				for k, own := range a.Factors {
					if own == f {
						parts = append(parts, prose.LevelText(p, p.Factors[f].Name, p.Factors[f].Levels[levels[k]]))
					}
				}
			}
			at[strings.Join(parts, ", ")] = a.Total[c]
		}
		for t, name := range names {
			k, ok := at[name]
			if !ok {
				return nil
			}
			out[t] = k
		}
		return out
	}
	if !equal || combinations == 0 || combinations != len(names) || p.Units[unit].N%combinations != 0 {
		return nil
	}
	for t := range out {
		out[t] = p.Units[unit].N / combinations
	}
	return out
}
