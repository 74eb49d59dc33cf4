package analysis

import (
	"math"

	"penwright/analysis/dataset"
	"penwright/analysis/trial"
	"penwright/protocol/factor"
	"penwright/protocol/layout"
)

// rows are the analysed values of one response: one for every instance of a unit that
// gave a value.
type rows struct {
	trial *trial.Trial
	plan  *layout.Plan
	resp  *dataset.Response

	unit       int       // index of the unit a row stands for
	inst       []int32   // its instance, for each row
	y          []float64 // the value
	covariates [][]float64
	of         []int // number of values of the response that the row is the mean of
	from       []int // index into the response of each row; the first one where it is a mean
}

// used takes the used rows of a response.
func used(t *trial.Trial, r *dataset.Response) *rows {
	x := &rows{trial: t, plan: t.Plan, resp: r, unit: r.Unit, covariates: make([][]float64, len(r.Covariates))}
	for i, s := range r.Status {
		if s != dataset.Used || math.IsNaN(r.Value[i]) {
			continue
		}
		x.inst = append(x.inst, r.Instance[i])
		x.y = append(x.y, r.Value[i])
		x.of = append(x.of, 1)
		x.from = append(x.from, i)
		for k := range r.Covariates {
			x.covariates[k] = append(x.covariates[k], r.Covariates[k][i])
		}
	}
	return x
}

// averaged takes unweighted means of the rows within the instances of a coarser unit,
// in the order of the plan.
func (x *rows) averaged(unit int) *rows {
	up := x.plan.Coarse(x.unit, unit)
	n := x.plan.Units[unit].N
	out := &rows{trial: x.trial, plan: x.plan, resp: x.resp, unit: unit, covariates: make([][]float64, len(x.covariates))}
	count := make([]int, n)
	first := make([]int, n)
	for i, u := range x.inst {
		v := up[u]
		if count[v] == 0 {
			first[v] = x.from[i]
		}
		count[v]++
	}
	at := make([]int, n)
	for v, c := range count {
		at[v] = -1
		if c > 0 {
			at[v] = len(out.inst)
			out.inst = append(out.inst, int32(v))
			out.of = append(out.of, c)
			out.from = append(out.from, first[v])
		}
	}
	mean := func(values []float64) []float64 {
		// The first value of each unit is taken off before summing, so that large values
		// with small differences lose nothing.
		ref := make([]float64, len(out.inst))
		sum := make([]float64, len(out.inst))
		seen := make([]bool, len(out.inst))
		for i, u := range x.inst {
			k := at[up[u]]
			if !seen[k] {
				ref[k], seen[k] = values[i], true
			}
			sum[k] += values[i] - ref[k]
		}
		for k := range sum {
			sum[k] = ref[k] + sum[k]/float64(out.of[k])
		}
		return sum
	}
	out.y = mean(x.y)
	for k := range x.covariates {
		out.covariates[k] = mean(x.covariates[k])
	}
	return out
}

// unitFactor classes the rows by the instances of a unit that is coarser or their own.
func (x *rows) unitFactor(unit int) factor.Factor {
	up := x.plan.Coarse(x.unit, unit)
	f := factor.Factor{Level: make([]int32, len(x.inst)), N: x.plan.Units[unit].N}
	for i, u := range x.inst {
		f.Level[i] = up[u]
	}
	return f
}

// treatmentFactor classes the rows by the levels of a factor of the plan.
func (x *rows) treatmentFactor(f int) factor.Factor {
	levels := x.trial.Allotment.LevelAt(f, x.unit)
	out := factor.Factor{Level: make([]int32, len(x.inst)), N: len(x.plan.Factors[f].Levels)}
	for i, u := range x.inst {
		out.Level[i] = levels[u]
	}
	return out
}

// bottom is the coarsest unit that is no coarser than the experimental unit of any of
// the terms: the unit to which values are averaged when smaller ones received nothing.
func (x *rows) bottom(terms []int) int {
	best := x.unit
	for u := range x.plan.Units {
		if x.plan.Coarse(x.unit, u) == nil {
			continue
		}
		all := true
		for _, t := range terms {
			all = all && x.plan.Coarse(u, x.plan.Terms[t].Unit) != nil
		}
		if all && x.plan.Coarse(best, u) != nil {
			best = u
		}
	}
	return best
}

// terms lists the treatment terms that the unit of the rows can tell: those whose
// experimental unit is that unit or coarser.
func (x *rows) terms() (can, cannot []int) {
	for t := range x.plan.Terms {
		if u := x.plan.Terms[t].Unit; u >= 0 && x.plan.Coarse(x.unit, u) != nil {
			can = append(can, t)
		} else {
			cannot = append(cannot, t)
		}
	}
	return can, cannot
}

// units lists the units of the rows, coarse before fine, in the order of the strata.
func (x *rows) units() []int {
	var out []int
	for _, s := range x.plan.Strata {
		if x.plan.Coarse(x.unit, s.Unit) != nil {
			out = append(out, s.Unit)
		}
	}
	return out
}
