package protocol

import (
	"cmp"
	"fmt"

	"penwright/protocol/internal/tomlpos"
)

// IsZero tells whether the date is absent.
func (d Date) IsZero() bool { return d == Date{} }

// String gives year-month-day, or "" for an absent date.
func (d Date) String() string {
	if d.IsZero() {
		return ""
	}
	return fmt.Sprintf("%04d-%02d-%02d", d.Year, d.Month, d.Day)
}

// Compare returns -1, 0 or 1 as d is before, on or after e.
func (d Date) Compare(e Date) int {
	return cmp.Or(cmp.Compare(d.Year, e.Year), cmp.Compare(d.Month, e.Month), cmp.Compare(d.Day, e.Day))
}

// Before tells whether both dates are stated and d is before e.
func (d Date) Before(e Date) bool { return !d.IsZero() && !e.IsZero() && d.Compare(e) < 0 }

// dates checks the order of dates: what cannot be is an error, what is odd a
// warning.
func (r *resolver) dates() {
	p := r.p
	never := func(firstKey string, first Date, laterKey string, later Date, what string) {
		if later.Before(first) {
			f := r.fail(laterKey, DateOrder, "one of the two dates is mistyped", what, later, first)
			f.Relate(p.ValuePos(firstKey), first.String()+" is given here")
		}
	}
	odd := func(firstKey string, first Date, laterKey string, later Date, what, hint string) {
		if later.Before(first) {
			f := r.warn(laterKey, DateOrder, hint, what, later, first)
			f.Relate(p.ValuePos(firstKey), first.String()+" is given here")
		}
	}
	start, end := p.Trial.Start, p.Trial.End
	never("trial.start", start, "trial.end", end, "the trial ends on %s, before it starts on %s")
	if a := p.Approval; a != nil {
		never("approval.date", a.Date, "approval.expires", a.Expires, "the approval expires on %s, before it was given on %s")
		odd("approval.date", a.Date, "trial.start", start, "the trial starts on %s, before its approval of %s", "no procedure may begin before the approval")
		odd("trial.end", end, "approval.expires", a.Expires, "the approval expires on %s, before the trial ends on %s", "ask the committee to prolong it")
	}
	for i, t := range p.Items {
		odd("trial.end", end, at("item", i, "expires"), t.Expires, "the item expires on %s, before the trial ends on %s", "use a batch that lasts")
	}
	odd("randomization.on", p.Randomization.On, "trial.start", start, "the trial starts on %s, before the draw of %s", "the draw must come before the first treatment")
	if b := p.Blinding; b != nil && p.Data != nil {
		odd("data.locked", p.Data.Locked, "blinding.unblinded", b.Unblinded, "the allotment was opened on %s, before the data were locked on %s", "lock the data first")
	}
	for i, c := range p.Covariates {
		if start.Before(c.Measured) {
			f := r.warn(at("covariate", i, "measured"), LateCovariate, "adjust only for what treatments cannot have changed", "%s was measured on %s, after treatment began on %s", quote(c.Name), c.Measured, start)
			f.Relate(p.ValuePos("trial.start"), "start is given here")
		}
	}
	for i, c := range p.Corrections {
		own := tomlpos.Index("correction", i)
		never(own+".on", c.On, own+".recorded", c.Recorded, "the correction was recorded on %s, before it was made on %s")
		if c.On.Before(c.Recorded) {
			r.warn(own+".recorded", LateEntry, "say why in reason", "the correction of %s was recorded on %s", c.On, c.Recorded)
		}
	}
	for i, e := range p.Events {
		own := tomlpos.Index("event", i)
		never(own+".from", e.From, own+".to", e.To, "the event ends on %s, before it begins on %s")
		odd("trial.start", start, own+".on", e.On, "the event of %s is before the start of the trial on %s", "compare the two dates")
		odd(own+".on", e.On, "trial.end", end, "the trial ends on %s, before the event of %s", "compare the two dates")
	}
	for i, e := range p.Exclusions {
		if b := p.Blinding; b != nil && isTrue(e.BeforeUnblinding) && b.Unblinded.Before(e.On) {
			f := r.fail(at("exclusion", i, "before_unblinding"), DateOrder, "write before_unblinding = false, or mend the dates", "the exclusion of %s came after the allotment was opened on %s", e.On, b.Unblinded)
			f.Relate(p.ValuePos("blinding.unblinded"), "unblinded is given here")
		}
	}
	for i, a := range p.Deviations {
		own := at("deviation", i, "on")
		odd("trial.start", start, own, a.On, "the deviation of %s is before the start of the trial on %s", "compare the two dates")
	}
	if c := p.Records; c != nil {
		odd("trial.end", end, "records.retain_until", c.RetainUntil, "the records are kept until %s, before the trial ends on %s", "records outlast the trial")
	}
}
