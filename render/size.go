package render

import (
	"penwright/analysis/num"
	"penwright/analysis/prose"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/layout"
	"penwright/render/doc"
	"penwright/render/figure"
	"penwright/render/table"
)

// powerFigure is the curve of power by replication; without points where none was computed.
func powerFigure(p *layout.Plan, s *result.SampleSize) figure.Power {
	f := figure.Power{X: "Replicates"}
	if s == nil || !s.Power.Known() {
		return f
	}
	d := num.SEDecimals(float64(s.SD) * 0.75)
	for _, x := range s.BySD {
		c := figure.PowerCurve{Label: "SD " + prose.SizeAmount(p, s, num.Fixed(float64(x.SD), d))}
		for i, q := range s.Curve {
			if i < len(x.Curve) && x.Curve[i].Known() {
				c.Points = append(c.Points, figure.PowerPoint{N: float64(q.Replicates), Power: float64(x.Curve[i])})
			}
		}
		if len(c.Points) > 1 {
			f.Curves = append(f.Curves, c)
		}
	}
	if len(f.Curves) == 0 {
		return f
	}
	f.Chosen = float64(s.Replicates)
	if s.Wished.Known() {
		f.Target = float64(s.Wished)
	}
	return f
}

// power is the figure of the power curve, nothing where there is none.
func (v *pictures) power() []doc.Block {
	f := powerFigure(v.trial.Plan, v.rs.SampleSize)
	if len(f.Curves) == 0 {
		return nil
	}
	return figureOf("figure-power", prose.PowerCaption(v.trial.Plan, v.rs.SampleSize), "power", f.Draw)
}

// Size is a short document on the number of units for a terminal: sentences, tables, and
// the power curve drawn with characters for the given width.
func Size(t *trial.Trial, s *result.SampleSize, width int) *doc.Document {
	p := t.Plan
	blocks := paragraphs(prose.Design(p))
	blocks = append(blocks, paragraphs(prose.Size(p))...)
	blocks = append(blocks, paragraphs(prose.SizeFound(p, s))...)
	if curve := powerFigure(p, s).Text(width); curve != "" {
		blocks = append(blocks, doc.Code{Text: curve})
	}
	for _, x := range sizeTables(p, s) {
		blocks = append(blocks, x)
	}
	blocks = append(blocks, bullets(prose.SizeNotes(s))...)
	return &doc.Document{Lang: "en", Blocks: blocks}
}

// sizeTables are the tables on the number of units that have rows.
func sizeTables(p *layout.Plan, s *result.SampleSize) []doc.Table {
	var out []doc.Table
	for _, x := range []doc.Table{table.Sizes(p, s), table.SizeSpread(p, s), table.SizeGroups(p, s), table.SizeTerms(p, s)} {
		if len(x.Rows) > 0 {
			out = append(out, x)
		}
	}
	return out
}
