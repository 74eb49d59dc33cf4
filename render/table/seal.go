package table

import (
	"fmt"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/prose"
	"penwright/analysis/trial"
	"penwright/protocol/seal"
	"penwright/render/doc"
)

// Revisions lists what differs from the sealed plan, with the amendment that covers it.
func Revisions(t *trial.Trial) doc.Table {
	if t.Seal == nil {
		return doc.Table{}
	}
	var rows [][]string
	for i := range t.Seal.Revisions {
		r := &t.Seal.Revisions[i]
		old, now := r.Texts()
		what := r.What
		if r.Kind != seal.Changed {
			what += " " + r.Kind.String()
		}
		covered := "no amendment"
		if r.Amendment >= 0 {
			a := t.Protocol.Amendments[r.Amendment]
			covered = strings.TrimPrefix(prose.DateText(a.On)+": ", ": ") + a.What
		}
		since := ""
		if len(t.Seal.Entries) > 1 {
			since = num.Count(r.Since)
		}
		rows = append(rows, []string{upper(what), old, now, since, covered})
	}
	return listing("revisions", "Changes of the plan since it was sealed", []string{"What", "Sealed", "Now", "Since seal", "Amendment"}, rows)
}

// Seals lists the seals of the plan.
func Seals(t *trial.Trial) doc.Table {
	if t.Seal == nil {
		return doc.Table{}
	}
	var rows [][]string
	for _, e := range t.Seal.Entries {
		data := ""
		if e.Data != "" {
			data = fmt.Sprintf("there already (%s)", short(e.Data))
		}
		rows = append(rows, []string{num.Count(e.Number), prose.DateText(e.On), e.By, short(e.SHA256), short(e.Roster), short(e.Allotment), data})
	}
	return listing("seals", "Seals of the plan", []string{"Seal", "On", "By", "Plan (SHA-256)", "Roster (SHA-256)", "Allotment (SHA-256)", "Data"}, rows)
}
