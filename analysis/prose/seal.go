package prose

import (
	"fmt"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/seal"
)

// NotPlanned says what of the analysis of a response was not in the plan sealed before
// the data; "" if all was.
func NotPlanned(b seal.Bearing) string {
	var parts []string
	for _, d := range b.Model {
		parts = append(parts, d.String())
	}
	var other []string
	for _, d := range b.Other {
		other = append(other, d.String())
	}
	switch {
	case b.New:
		return "Not planned before the data: this response was not in the sealed plan."
	case len(parts) > 0:
		return "Not planned before the data: the analysis is not the one that was sealed (" + strings.Join(append(parts, other...), "; ") + ")."
	case len(other) > 0:
		return "Not planned before the data: " + strings.Join(other, "; ") + "."
	}
	return ""
}

// Planned tells whether the analysis of a response was in the plan sealed before the
// data, or there was no such seal.
func Planned(r *result.Response) bool {
	for _, t := range r.Tests {
		if !t.Planned {
			return false
		}
	}
	return r.Planned
}

// foremost are the contrasts that may be spoken of as the result: of a planned analysis
// those that were planned, of any other all, since nothing of it was.
func foremost(r *result.Response) []result.Contrast {
	if !Planned(r) {
		return r.Contrasts
	}
	var out []result.Contrast
	for _, c := range r.Contrasts {
		if c.Planned {
			out = append(out, c)
		}
	}
	return out
}

// Seal says when the plan was sealed and what became of it since.
func Seal(t *trial.Trial) []string {
	if t.Seal == nil {
		return []string{"The plan was not sealed, so that nothing proves which analyses were planned before the data."}
	}
	var out []string
	for i := range t.Seal.Entries {
		e := &t.Seal.Entries[i]
		s := "The plan was sealed"
		if i > 0 {
			s += " again"
		}
		if d := DateText(e.On); d != "" {
			s += " on " + d
		}
		if e.By != "" {
			s += " by " + e.By
		}
		if e.Data != "" {
			s += ", when there were data already"
		}
		out = append(out, fmt.Sprintf("%s (SHA-256 of the plan %s).", s, e.SHA256))
	}
	all, open := len(t.Seal.Revisions), 0
	for _, r := range t.Seal.Revisions {
		if r.Amendment < 0 {
			open++
		}
	}
	switch {
	case all == 0:
		out = append(out, "Nothing that was sealed has been changed since.")
	case open == 0:
		out = append(out, fmt.Sprintf("Since then the plan differs in %s, covered by amendments.", differences(all)))
	case open == all:
		out = append(out, fmt.Sprintf("Since then the plan differs in %s, which no amendment covers.", differences(all)))
	default:
		out = append(out, fmt.Sprintf("Since then the plan differs in %s; no amendment covers %s of them.", differences(all), num.Count(open)))
	}
	return append(out, "Dates are the word of those who wrote them: a seal proves agreement, not when it was made.")
}

func differences(n int) string {
	if n == 1 {
		return "one point"
	}
	return num.Count(n) + " points"
}
