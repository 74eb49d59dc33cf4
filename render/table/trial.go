package table

import (
	"fmt"
	"math"
	"strconv"
	"strings"

	"penwright/analysis/dataset"
	"penwright/analysis/num"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/diag"
	"penwright/protocol/layout"
	"penwright/protocol/sheet"
	"penwright/render/doc"
)

// pairs makes a table of two columns, what and how much of it, leaving out what is not
// said.
func pairs(id, caption string, rows ...[2]string) doc.Table {
	t := doc.Table{ID: id, Caption: text(caption), Columns: []doc.Column{left(true), left(false)}}
	for _, r := range rows {
		if r[1] != "" {
			t.Rows = append(t.Rows, doc.Row{Cells: []doc.Cell{cell(r[0]), cell(r[1])}})
		}
	}
	return t
}

// listing makes a table of texts and drops the columns that are empty throughout.
func listing(id, caption string, headings []string, rows [][]string) doc.Table {
	t := doc.Table{ID: id, Caption: text(caption)}
	var keep []int
	for c := range headings {
		for _, r := range rows {
			if r[c] != "" {
				keep = append(keep, c)
				break
			}
		}
	}
	var h []doc.Cell
	for n, c := range keep {
		t.Columns = append(t.Columns, left(n == 0))
		h = append(h, cell(headings[c]))
	}
	t.Head = head(h...)
	for _, r := range rows {
		var cells []doc.Cell
		for _, c := range keep {
			cells = append(cells, cell(r[c]))
		}
		t.Rows = append(t.Rows, doc.Row{Cells: cells})
	}
	return t
}

// Identity names the trial, its people, its approval and its fingerprint.
func Identity(t *trial.Trial, status, fingerprint string) doc.Table {
	p := t.Protocol
	var people []string
	for _, x := range p.Persons {
		s := x.Name
		if x.Role != "" {
			s += ", " + x.Role
		}
		if x.Affiliation != "" {
			s += ", " + x.Affiliation
		}
		if x.ORCID != "" {
			s += ", ORCID " + x.ORCID
		}
		people = append(people, s)
	}
	dates := prose.DateText(p.Trial.Start)
	if e := prose.DateText(p.Trial.End); e != "" {
		dates += " to " + e
	}
	approval := ""
	if a := p.Approval; a != nil {
		approval = strings.TrimPrefix(a.Body+", "+a.Number, ", ")
		if d := prose.DateText(a.Date); d != "" {
			approval += ", given " + d
		}
		if d := prose.DateText(a.Expires); d != "" {
			approval += ", expires " + d
		}
		if a.Severity != "" {
			approval += "; severity foreseen: " + a.Severity
		}
		if a.SeverityObserved != "" {
			approval += ", observed: " + a.SeverityObserved
		}
	}
	return pairs("identity", "The trial",
		[2]string{"Code", p.Trial.Code}, [2]string{"Status", status}, [2]string{"Dates", dates}, [2]string{"Site", p.Trial.Site},
		[2]string{"People", strings.Join(people, "; ")}, [2]string{"Approval", approval}, [2]string{"Registration", p.Trial.Registration},
		[2]string{"Funding", p.Trial.Funding}, [2]string{"Interests", p.Trial.Interests}, [2]string{"Access to data", p.Trial.DataAccess},
		[2]string{"Fingerprint", fingerprint})
}

// Skeleton is the analysis of variance before there are data: sources, df, tested over.
func Skeleton(p *layout.Plan) doc.Table {
	t := doc.Table{
		ID: "skeleton", Caption: text("Skeleton analysis of variance"),
		Columns: []doc.Column{left(true), decimal(), left(false)},
		Head:    head(cell("Source"), emph("df"), cell("Tested over")),
	}
	lines := p.Skeleton()
	stratum := ""
	for i, l := range lines {
		over := ""
		if l.Over >= 0 {
			over = prose.SkeletonSource(p, lines[l.Over])
		}
		name := prose.SkeletonSource(p, l)
		c := cell(name)
		if l.Kind == layout.PartLine {
			c = doc.Cell{Text: append([]doc.Inline{doc.Text{Text: "\u2003"}}, text(name)...)}
		}
		t.Rows = append(t.Rows, doc.Row{Rule: i > 0 && l.Stratum != stratum, Cells: []doc.Cell{c, cell(num.DF(float64(l.DF))), cell(over)}})
		stratum = l.Stratum
	}
	if len(p.Protocol.Covariates) > 0 {
		t.Notes = append(t.Notes, text("Each covariate of a response takes one more degree of freedom from the error it is adjusted in."))
	}
	return t
}

// Checks lists the checks of the design.
func Checks(rs *result.Results) doc.Table {
	var rows [][]string
	for _, c := range rs.Design.Checks {
		rows = append(rows, []string{upper(c.Level), c.Text, c.Where})
	}
	return listing("checks", "Checks of the design", []string{"Finding", "What was looked at", "Place in the protocol"}, rows)
}

// Animals describes the animals or the material.
func Animals(p *protocol.Protocol) doc.Table {
	if a := p.Animals; a != nil {
		chain := ""
		if a.FoodChain != nil {
			chain = "no"
			if *a.FoodChain {
				chain = "yes"
			}
		}
		return pairs("animals", "Animals",
			[2]string{"Species", a.Species}, [2]string{"Breed", a.Breed}, [2]string{"Sex", a.Sex}, [2]string{"Source", a.Source}, [2]string{"Health", a.Health},
			[2]string{"Genotype", a.Genotype}, [2]string{"Previous use", a.PreviousUse}, [2]string{"Enter the food chain", chain},
			[2]string{"Age at start", prose.QuantityText(a.Age)}, [2]string{"Body mass at start", prose.QuantityText(a.Mass)}, [2]string{"Body mass expected at the end", prose.QuantityText(a.MassEnd)},
			[2]string{"Acclimatization", prose.QuantityText(a.Acclimatization)})
	}
	if m := p.Material; m != nil {
		return pairs("animals", "Material", [2]string{"Crop", m.Crop}, [2]string{"Variety", m.Variety}, [2]string{"Seed rate", m.SeedRate}, [2]string{"Source", m.Source})
	}
	return doc.Table{}
}

// Site describes the place of a field trial and its plots.
func Site(p *protocol.Protocol) doc.Table {
	var rows [][2]string
	if s := p.Site; s != nil {
		place := ""
		if s.Latitude != nil && s.Longitude != nil {
			d := Places([]float64{*s.Latitude, *s.Longitude})
			place = fmt.Sprintf("%s°, %s°", num.Fixed(*s.Latitude, d), num.Fixed(*s.Longitude, d))
		}
		rows = append(rows, [2]string{"Site", s.Name}, [2]string{"Latitude, longitude", place}, [2]string{"Soil", s.Soil}, [2]string{"Season", s.Season},
			[2]string{"Previous crop", s.PreviousCrop}, [2]string{"Weather", s.Weather})
	}
	if s := p.Plot; s != nil {
		rows = append(rows, [2]string{"Plot length", prose.QuantityText(s.Length)}, [2]string{"Plot width", prose.QuantityText(s.Width)},
			[2]string{"Net area", prose.QuantityText(s.NetArea)}, [2]string{"Border", prose.QuantityText(s.Border)})
	}
	return pairs("site", "Site and plots", rows...)
}

// Housing describes how animals are kept.
func Housing(p *protocol.Protocol) doc.Table {
	h := p.Housing
	if h == nil {
		return doc.Table{}
	}
	group := ""
	if h.GroupSize > 0 {
		group = num.Count(h.GroupSize)
	}
	return pairs("housing", "Housing", [2]string{"Group size", group}, [2]string{"Floor area per animal", prose.QuantityText(h.FloorArea)},
		[2]string{"Temperature", prose.QuantityText(h.Temperature)}, [2]string{"Lighting", h.Lighting}, [2]string{"Bedding", h.Bedding}, [2]string{"Enrichment", h.Enrichment},
		[2]string{"Feed", h.Feed}, [2]string{"Water", h.Water})
}

// Eligibility lists what was set before the trial on who enters and what is excluded.
func Eligibility(p *protocol.Protocol) doc.Table {
	e := p.Eligibility
	return pairs("eligibility", "Eligibility and exclusion, set before the trial", [2]string{"Included", strings.Join(e.Include, "; ")}, [2]string{"Not included", strings.Join(e.Exclude, "; ")},
		[2]string{"Rules of exclusion", strings.Join(e.ExclusionRules, "; ")})
}

// Levels describes the levels of the treatment factors.
func Levels(p *layout.Plan) doc.Table {
	var rows [][]string
	for i := range p.Factors {
		f := &p.Factors[i]
		if f.Protocol == nil {
			continue
		}
		for _, d := range f.Protocol.Describe {
			rows = append(rows, []string{prose.FactorLabel(f), prose.LevelText(p, f.Name, d.Level), d.Text})
		}
	}
	return listing("levels", "Treatments", []string{"Factor", "Level", "What it is"}, rows)
}

// Items lists test items, diets and products.
func Items(p *protocol.Protocol) doc.Table {
	var rows [][]string
	for _, x := range p.Items {
		rows = append(rows, []string{x.Name, x.Batch, x.Purity, prose.DateText(x.Expires), x.Storage, x.Supplier, x.Analysed})
	}
	return listing("items", "Test items", []string{"Item", "Batch", "Purity", "Expires", "Storage", "Supplier", "Analysed"}, rows)
}

// Inputs lists what was applied to the whole trial.
func Inputs(p *protocol.Protocol) doc.Table {
	var rows [][]string
	for _, x := range p.Inputs {
		rows = append(rows, []string{prose.DateText(x.On), x.What, x.Rate})
	}
	return listing("inputs", "Inputs to the whole trial", []string{"On", "What", "Rate"}, rows)
}

// Draws lists every draw with the reason for drawing again.
func Draws(a *allot.Allotment) doc.Table {
	if a == nil || len(a.Draws) == 0 {
		return doc.Table{}
	}
	var rows [][]string
	for _, d := range a.Draws {
		rows = append(rows, []string{num.Count(d.Number), prose.DateText(d.On), d.By, d.Seed, d.Why, short(d.Allotment), short(d.Plan)})
	}
	return listing("draws", "Draws", []string{"Draw", "On", "By", "Seed", "Why again", "Allotment (SHA-256)", "Plan (SHA-256)"}, rows)
}

// short shows the first hex digits of a hash.
func short(hash string) string {
	if len(hash) > 12 {
		return hash[:12] + "…"
	}
	return hash
}

// Allotment is the list of units with what each received, at most limit of them.
func Allotment(t *trial.Trial, limit int) doc.Table {
	out := doc.Table{ID: "allotment", Caption: text("Allotment"), Sortable: true}
	a, p := t.Allotment, t.Plan
	if a == nil {
		return doc.Table{}
	}
	unit := allot.RowUnit(p)
	if unit < 0 {
		return doc.Table{}
	}
	var h []doc.Cell
	var units []int
	for u := range p.Units {
		if p.Coarse(unit, u) != nil && p.Units[u].Own != nil {
			units = append(units, u)
			out.Columns = append(out.Columns, left(true))
			h = append(h, cell(prose.TermLabel(p, p.Units[u].Name)))
		}
	}
	if a.Codes != nil {
		out.Columns = append(out.Columns, left(false))
		h = append(h, cell("Code"))
	}
	var levels [][]int32
	var factors []int
	for f := range p.Factors {
		if u := p.Factors[f].Unit; u >= 0 && p.Coarse(unit, u) != nil {
			factors = append(factors, f)
			levels = append(levels, a.LevelAt(f, unit))
			out.Columns = append(out.Columns, levelColumn(p, p.Factors[f].Name))
			out.Columns[len(out.Columns)-1].Key = false
			h = append(h, cell(prose.FactorHead(p, p.Factors[f].Name)))
		}
	}
	out.Head = head(h...)
	for i := range p.Units[unit].N {
		if i == limit {
			out.Notes = append(out.Notes, text("The first "+num.Count(limit)+" of "+num.Count(p.Units[unit].N)+" units; the whole allotment rides inside this report."))
			break
		}
		var c []doc.Cell
		for _, u := range units {
			c = append(c, cell(p.Units[u].Own[p.Coarse(unit, u)[i]]))
		}
		if a.Codes != nil {
			code := ""
			if i < len(a.Codes) {
				code = a.Codes[i]
			}
			c = append(c, cell(code))
		}
		for k, f := range factors {
			l := levels[k][i]
			if l < 0 {
				c = append(c, cell(num.Absent))
				continue
			}
			c = append(c, cell(p.Factors[f].Levels[l]))
		}
		out.Rows = append(out.Rows, doc.Row{Cells: c})
	}
	return out
}

// Disagreements lists units whose treatment in the data is not the one allotted.
func Disagreements(t *trial.Trial) doc.Table {
	if t.Table == nil {
		return doc.Table{}
	}
	var rows [][]string
	for _, d := range t.Table.Disagreements {
		f := &t.Plan.Factors[d.Factor]
		rows = append(rows, []string{allot.Describe(t.Plan, f.Unit, d.Instance), prose.FactorLabel(f), level(f, d.Allotted), d.Found, origin(t.Table, d.Origin)})
	}
	return listing("disagreements", "Units whose treatment in the data is not the one allotted", []string{"Unit", "Factor", "Allotted", "In the data", "Place"}, rows)
}

func level(f *layout.Factor, l int32) string {
	if l < 0 || int(l) >= len(f.Levels) {
		return num.Absent
	}
	return f.Levels[l]
}

func origin(t *dataset.Table, o dataset.Origin) string {
	if o.First == 0 || int(o.File) >= len(t.Files) {
		return ""
	}
	return fmt.Sprintf("%s, line %d", t.Files[o.File].Path, o.First)
}

// Events lists what happened to units.
func Events(p *protocol.Protocol) doc.Table {
	var rows [][]string
	for _, e := range p.Events {
		animals := ""
		if e.Animals > 0 {
			animals = num.Count(e.Animals)
		}
		rows = append(rows, []string{prose.DateText(e.On), prose.UnitNameText(e.Unit), animals, e.Kind, e.Cause, e.Action, prose.QuantityText(e.Mass), e.Given, e.By})
	}
	return listing("events", "Events", []string{"On", "Unit", "Animals", "Kind", "Cause", "Action", "Body mass", "Given", "By"}, rows)
}

// Exclusions lists units left out, and whether the rule stood beforehand.
func Exclusions(t *trial.Trial) doc.Table {
	p := t.Protocol
	var rows [][]string
	for _, e := range p.Exclusions {
		rule := "not among the rules set before the trial"
		if e.Rule != "" {
			rule = e.Rule
			if !t.Seal.Rule(e.Rule) {
				rule += " (not planned before the data)"
			}
		}
		masked := ""
		if e.BeforeUnblinding != nil {
			masked = "after unmasking"
			if *e.BeforeUnblinding {
				masked = "before unmasking"
			}
		}
		responses := "all"
		if len(e.Responses) > 0 {
			var names []string
			for _, r := range e.Responses {
				if x := p.Response(r); x != nil {
					names = append(names, prose.ResponseLabel(x))
				}
			}
			responses = strings.Join(names, ", ")
		}
		unit := prose.UnitNameText(e.Unit)
		if e.At != "" {
			unit += ", at " + e.At
		}
		rows = append(rows, []string{prose.DateText(e.On), unit, responses, e.Reason, rule, masked, e.By})
	}
	return listing("exclusions", "Exclusions", []string{"On", "Unit", "Responses", "Reason", "Rule", "Decided", "By"}, rows)
}

// Deviations lists departures from the plan.
func Deviations(p *protocol.Protocol) doc.Table {
	var rows [][]string
	for _, d := range p.Deviations {
		rows = append(rows, []string{prose.DateText(d.On), d.What, d.Effect, d.By})
	}
	return listing("deviations", "Deviations from the plan", []string{"On", "What", "Effect", "By"}, rows)
}

// Corrections lists replaced values with what was written before.
func Corrections(p *protocol.Protocol) doc.Table {
	var rows [][]string
	for _, c := range p.Corrections {
		rows = append(rows, []string{c.File, prose.UnitNameText(c.Unit), c.Column, c.Old, c.New, c.Reason, c.By, prose.DateText(c.On), prose.DateText(c.Recorded)})
	}
	return listing("corrections", "Corrections of written values", []string{"File", "Unit", "Column", "Written", "Corrected", "Reason", "By", "On", "Recorded"}, rows)
}

// Confirmed lists values outside their range that a person confirmed.
func Confirmed(p *protocol.Protocol) doc.Table {
	var rows [][]string
	if p.Data != nil {
		for _, c := range p.Data.Confirmed {
			rows = append(rows, []string{prose.UnitNameText(c.Unit), c.Response, num.Fixed(c.Value, Places([]float64{c.Value})), c.Note, c.By})
		}
	}
	return listing("confirmed", "Values outside their range that were confirmed", []string{"Unit", "Response", "Value", "Note", "By"}, rows)
}

// Amendments lists changes of the plan.
func Amendments(p *protocol.Protocol) doc.Table {
	var rows [][]string
	for _, a := range p.Amendments {
		rows = append(rows, []string{prose.DateText(a.On), a.What, a.Why, a.By, a.Approval})
	}
	return listing("amendments", "Amendments of the plan", []string{"On", "What", "Why", "By", "Approval"}, rows)
}

// Data says how the data files were read.
func Data(t *trial.Trial) doc.Table {
	if t.Table == nil {
		return doc.Table{}
	}
	var rows [][]string
	for _, f := range t.Table.Files {
		delimiter := map[rune]string{',': "comma", ';': "semicolon", '\t': "tab"}[f.Delimiter]
		mark := map[rune]string{'.': "point", ',': "comma"}[f.Decimal]
		rows = append(rows, []string{f.Path, num.Count(f.Rows), f.Encoding, delimiter, mark, strings.Join(f.Unused, ", ")})
	}
	return listing("data", "Data files as they were read", []string{"File", "Rows", "Encoding", "Between cells", "Decimal mark", "Columns not used"}, rows)
}

func rangeText(r *protocol.Response) string {
	if r.Range == nil {
		return ""
	}
	d := Places(r.Range[:])
	return num.Fixed(r.Range[0], d) + " to " + num.Fixed(r.Range[1], d)
}

// Planned lists the responses that the protocol names.
func Planned(p *protocol.Protocol) doc.Table {
	var rows [][]string
	for i := range p.Responses {
		r := &p.Responses[i]
		rows = append(rows, []string{prose.ResponseLabel(r), num.UnitText(r.Unit), r.Role, r.Kind, r.How, r.Instrument, r.Assessed, rangeText(r)})
	}
	return listing("planned", "Responses", []string{"Response", "Unit", "Role", "Kind", "How", "Instrument", "Assessed", "Plausible range"}, rows)
}

// Welfare prints what the protocol says of the animals’ welfare.
func Welfare(p *protocol.Protocol) doc.Table {
	w := p.Welfare
	if w == nil {
		return doc.Table{}
	}
	monitoring := ""
	if w.Monitoring.TimesPerDay > 0 {
		monitoring = num.Fixed(w.Monitoring.TimesPerDay, Places([]float64{w.Monitoring.TimesPerDay})) + " times a day"
	}
	if w.Monitoring.By != "" {
		monitoring = strings.TrimPrefix(monitoring+" by "+w.Monitoring.By, " ")
	}
	return pairs("welfare", "Welfare as the protocol states it", [2]string{"Aim", w.Aim}, [2]string{"Monitoring", monitoring}, [2]string{"Rescue", w.Rescue.Body},
		[2]string{"Replacement", w.Replacement.Body}, [2]string{"Reduction", w.Reduction.Body}, [2]string{"Refinement", w.Refinement.Body},
		[2]string{"Killing", w.Euthanasia.Body}, [2]string{"Fate of the animals", w.Fate}, [2]string{"Residues", w.Residues}, [2]string{"Safety of staff", strings.Join(w.StaffSafety, "; ")})
}

// Procedures lists what is done to the animals.
func Procedures(p *protocol.Protocol) doc.Table {
	if p.Welfare == nil {
		return doc.Table{}
	}
	var rows [][]string
	for _, x := range p.Welfare.Procedures {
		times := ""
		if x.Times > 0 {
			times = num.Count(x.Times)
		}
		name := x.Name
		if name == "" {
			name = x.Kind
		}
		rows = append(rows, []string{name, x.Kind, prose.QuantityText(x.Volume), times, prose.QuantityText(x.Every), prose.QuantityText(x.Duration), x.Route, x.How, x.Where, x.Why, x.Analgesia, x.Anaesthesia})
	}
	return listing("procedures", "Procedures", []string{"Procedure", "Kind", "Volume", "Times", "Every", "Duration", "Route", "How", "Where", "Why", "Analgesia", "Anaesthesia"}, rows)
}

// Losses counts removals and deaths by treatment.
func Losses(t *trial.Trial) doc.Table {
	p := t.Plan
	unit := allot.RowUnit(p)
	if t.Allotment == nil || unit < 0 {
		return doc.Table{}
	}
	type count struct{ deaths, removals, illnesses int }
	counts := map[string]*count{}
	var order []string
	for i := range p.Units[unit].N {
		k := prose.TreatmentText(t, unit, i)
		if counts[k] == nil {
			counts[k] = &count{}
			order = append(order, k)
		}
	}
	any := false
	finder := allot.NewFinder(p)
	for _, e := range t.Protocol.Events {
		u, i, bad := finder.Unit(e.Unit)
		if bad != nil || p.Coarse(u, unit) == nil {
			continue
		}
		c := counts[prose.TreatmentText(t, unit, int(p.Coarse(u, unit)[i]))]
		n := max(e.Animals, 1)
		switch e.Kind {
		case "death":
			c.deaths += n
			any = true
		case "removal":
			c.removals += n
			any = true
		case "illness":
			c.illnesses += n
			any = true
		}
	}
	if !any {
		return doc.Table{}
	}
	out := doc.Table{ID: "losses", Caption: text("Deaths, removals and illness by treatment (animals)"),
		Columns: []doc.Column{left(true), decimal(), decimal(), decimal()}, Head: head(cell("Treatment"), cell("Deaths"), cell("Removals"), cell("Illness"))}
	sortTreatments(t, unit, order)
	for _, k := range order {
		c := counts[k]
		if k == prose.UnknownTreatment && *c == (count{}) {
			continue
		}
		out.Rows = append(out.Rows, doc.Row{Cells: []doc.Cell{cell(k), cell(num.Count(c.deaths)), cell(num.Count(c.removals)), cell(num.Count(c.illnesses))}})
	}
	return out
}

// Files lists what the report was made of.
func Files(rs *result.Results) doc.Table {
	var rows [][]string
	for _, f := range rs.Inputs {
		rows = append(rows, []string{f.Path, num.Count(f.Bytes), f.SHA256})
	}
	return listing("files", "Files this report was made of", []string{"File", "Bytes", "SHA-256"}, rows)
}

// Signatures gives lines for what was signed and for what is to be signed.
func Signatures(p *protocol.Protocol) doc.Table {
	var rows [][]string
	for _, s := range p.Signatures {
		rows = append(rows, []string{s.Who, s.Meaning, prose.DateText(s.On), "as stated in the protocol"})
	}
	rows = append(rows, []string{"", "study director: this report", "", "................................................"})
	return listing("signatures", "Signatures", []string{"Who", "Meaning", "On", "Signature"}, rows)
}

// sortTreatments puts treatments in the order of their levels rather than of the draw.
func sortTreatments(t *trial.Trial, unit int, names []string) {
	rank := map[string]int{}
	for i, n := range prose.TreatmentOrder(t, unit) {
		rank[n] = i
	}
	for i := 1; i < len(names); i++ {
		for j := i; j > 0 && rank[names[j]] < rank[names[j-1]]; j-- {
			names[j], names[j-1] = names[j-1], names[j]
		}
	}
}

// Baseline describes covariates and other baseline values by treatment: no P, since
// treatments were drawn and any difference is chance.
func Baseline(t *trial.Trial) doc.Table {
	unit := allot.RowUnit(t.Plan)
	if t.Table == nil || t.Allotment == nil || unit < 0 {
		return doc.Table{}
	}
	out := doc.Table{ID: "baseline", Caption: text("Baseline values of experimental units by treatment"),
		Columns: []doc.Column{left(true), left(true), decimal(), decimal(), decimal()},
		Head:    head(cell("Covariate"), cell("Treatment"), cell("Units"), cell("Mean"), cell("SD"))}
	names := prose.TreatmentOrder(t, unit)
	done := map[string]bool{}
	for i := range t.Table.Responses {
		r := &t.Table.Responses[i]
		if t.Plan.Coarse(r.Unit, unit) == nil {
			continue
		}
		up := t.Plan.Coarse(r.Unit, unit)
		for k, name := range r.Protocol.Covariates {
			c := t.Protocol.Covariate(name)
			if done[name] || c == nil {
				continue
			}
			done[name] = true
			sum, n := make([]float64, t.Plan.Units[unit].N), make([]int, t.Plan.Units[unit].N)
			for row, v := range r.Covariates[k] {
				if v == v { // not NaN
					sum[up[r.Instance[row]]] += v
					n[up[r.Instance[row]]]++
				}
			}
			values := map[string][]float64{}
			for u := range sum {
				if n[u] > 0 {
					x := prose.TreatmentText(t, unit, u)
					values[x] = append(values[x], sum[u]/float64(n[u]))
				}
			}
			label := prose.CovariateLabel(c)
			if c.Unit != "" {
				label += " (" + num.UnitText(c.Unit) + ")"
			}
			first := true
			for _, x := range names {
				v := values[x]
				if x == prose.UnknownTreatment && len(v) == 0 {
					continue
				}
				m, sd := moments(v)
				d := num.SEDecimals(sd)
				show := label
				if !first {
					show = ""
				}
				out.Rows = append(out.Rows, doc.Row{Rule: first && len(out.Rows) > 0, Cells: []doc.Cell{cell(show), cell(x), cell(num.Count(len(v))), cell(num.Fixed(m, d)), cell(num.Fixed(sd, d))}})
				first = false
			}
		}
	}
	out.Notes = [][]doc.Inline{text("Descriptive only: treatments were allotted without regard to the response, so that a test of baseline values would test the draw.")}
	return out
}

// moments are the mean and standard deviation of values, NaN where there are too few.
func moments(v []float64) (mean, sd float64) {
	if len(v) == 0 {
		return math.NaN(), math.NaN()
	}
	for _, x := range v {
		mean += x / float64(len(v))
	}
	if len(v) < 2 {
		return mean, math.NaN()
	}
	for _, x := range v {
		sd += (x - mean) * (x - mean)
	}
	return mean, math.Sqrt(sd / float64(len(v)-1))
}

// FromFile makes a table of a delimited text file, its first row being the head. Columns
// that hold nothing but numbers are aligned at the decimal mark. The table is empty where
// the list has an error.
func FromFile(id, caption, path string, data []byte) (doc.Table, diag.List) {
	out := doc.Table{ID: id, Caption: text(caption)}
	s, list := sheet.Open(path, data, "auto")
	if list.HasErrors() {
		return doc.Table{}, list
	}
	var rows [][]string
	_, _, _, more := s.Rows(func(r sheet.Row) bool {
		var cells []string
		for c := range s.Headings {
			cell := ""
			if c < len(r.Cells) {
				cell = strings.TrimSpace(r.Cells[c].Text)
			}
			cells = append(cells, cell)
		}
		rows = append(rows, cells)
		return len(rows) <= maxRows
	})
	list = append(list, more...)
	if len(rows) > maxRows || len(s.Headings) > maxColumns {
		list.Add(diag.Diagnostic{Pos: diag.Pos{File: path, Line: 1}, Severity: diag.Error, Code: "table-too-large",
			Message: fmt.Sprintf("the table has %d columns and %d rows or more; a report prints up to %d and %d", len(s.Headings), len(rows), maxColumns, maxRows)})
		return doc.Table{}, list
	}
	var h []doc.Cell
	for c, name := range s.Headings {
		numeric, any := true, false
		for _, row := range rows {
			if row[c] != "" {
				any = true
				if _, err := strconv.ParseFloat(strings.Replace(row[c], ",", ".", 1), 64); err != nil {
					numeric = false
				}
			}
		}
		col := left(c == 0)
		if numeric && any {
			col.Align = doc.Decimal
		}
		out.Columns = append(out.Columns, col)
		h = append(h, cell(name))
	}
	out.Head = head(h...)
	for _, row := range rows {
		var cells []doc.Cell
		for c, v := range row {
			if out.Columns[c].Align == doc.Decimal {
				v = strings.Replace(v, "-", "−", 1)
			}
			cells = append(cells, cell(v))
		}
		out.Rows = append(out.Rows, doc.Row{Cells: cells})
	}
	return out, list
}

// The greatest table of a file that is printed.
const (
	maxRows    = 2000
	maxColumns = 60
)

// AnalysisPlan prints what the protocol says of the analysis beforehand, also what a
// later version of the program will carry out.
func AnalysisPlan(p *protocol.Protocol) doc.Table {
	a := p.Analysis
	given := func(key, value string) string {
		if p.Given(key) {
			return value
		}
		return ""
	}
	number := func(x float64) string { return num.Fixed(x, Places([]float64{x})) }
	rows := [][2]string{
		{"Level of significance", number(a.Alpha)},
		{"Tendency up to", given("analysis.tendency", number(a.Tendency))},
		{"Comparison of means", prose.Method(a.Comparison)},
		{"Side", given("analysis.side", a.Side)},
		{"Pairs of interactions", given("analysis.pairs", a.Pairs)},
		{"Letters", given("analysis.letters", a.Letters)},
		{"Highest trend", given("analysis.trend", strconv.Itoa(a.Trend))},
		{"Interactions", given("analysis.interactions", orders(a.Interactions))},
		{"Blocks", given("analysis.blocks", a.Blocks)},
		{"Adjustment", given("analysis.adjustment", a.Adjustment)},
		{"Degrees of freedom of mixed models", given("analysis.df_method", a.DFMethod)},
		{"Components of variance", given("analysis.components", a.Components)},
		{"Limits of components", given("analysis.limits", a.Limits)},
		{"Residual variance by", a.VarianceBy},
		{"Draws of the randomization test", given("analysis.randomization_test", num.Count(a.RandomizationTest))},
		{"Least error degrees of freedom", given("analysis.error_df_min", num.Count(a.ErrorDFMin))},
		{"Margin of equivalence", given("analysis.margin", number(a.Margin))},
	}
	for _, c := range a.Contrasts {
		rows = append(rows, [2]string{"Contrast", contrastText(c)})
	}
	for i := range p.Responses {
		for _, c := range p.Responses[i].Contrasts {
			rows = append(rows, [2]string{"Contrast of " + prose.ResponseLabelText(&p.Responses[i]), contrastText(c)})
		}
	}
	if d := a.DoseResponse; d != nil {
		rows = append(rows, [2]string{"Dose response", d.Factor + ": " + strings.Join(d.Models, ", ")})
	}
	for _, c := range p.Covariates {
		s := prose.CovariateLabel(&c)
		if d := prose.DateText(c.Measured); d != "" {
			s += ", measured " + d
		}
		if c.Slopes != "" && c.Slopes != "common" {
			s += ", slopes " + c.Slopes
		}
		rows = append(rows, [2]string{"Covariate", s})
	}
	for _, r := range p.Repeated {
		rows = append(rows, [2]string{"Repeated on " + r.On, fmt.Sprintf("%s at %s %s; correlation %s", r.Name, strings.Join(r.At, ", "), num.UnitText(r.Unit), r.Correlation)})
	}
	if c := p.CarryOver; c != nil {
		s := fmt.Sprintf("of %s along %s on %s", c.Factor, c.Along, c.On)
		for _, q := range c.Sequences {
			s += "; sequence " + strings.Join(q, ", ")
		}
		rows = append(rows, [2]string{"Carry-over", s})
	}
	if t := p.TimeTrend; t != nil {
		rows = append(rows, [2]string{"Time trend", fmt.Sprintf("of order %d along %s for each %s", max(t.Order, 1), t.Along, t.On)})
	}
	if len(p.Randomization.BalanceOn) > 0 {
		rows = append(rows, [2]string{"Draw balanced on", fmt.Sprintf("%s, the best of %d candidates", strings.Join(p.Randomization.BalanceOn, ", "), p.Randomization.Candidates)})
	}
	if r := p.Roster; r != nil {
		s := r.File
		if r.BlockBy != "" {
			s += ", blocks formed by " + r.BlockBy
		}
		rows = append(rows, [2]string{"Roster", s})
	}
	return pairs("analysis-plan", "Analysis as the protocol plans it", rows...)
}

func orders(n int) string {
	switch {
	case n < 0:
		return "as the layout allows"
	case n == 1:
		return "none"
	}
	return fmt.Sprintf("of up to %d factors", n)
}

func contrastText(c protocol.Contrast) string {
	var parts []string
	for _, w := range c.Weights {
		parts = append(parts, fmt.Sprintf("%s × %s", num.Fixed(w.Value, Places([]float64{w.Value})), w.Level))
	}
	return fmt.Sprintf("%s (%s): %s", c.Name, c.Factor, strings.Join(parts, ", "))
}
