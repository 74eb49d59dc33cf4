package sound

import (
	"fmt"
	"slices"

	"penwright/analysis/prose"
	"penwright/protocol"
	"penwright/protocol/allot"
)

// trends finds amounts whose levels are to be compared in pairs without a trend.
func (c *checker) trends() {
	p := c.plan
	a := p.Protocol.Analysis
	if a.Trend > 0 || len(p.Protocol.Responses) > 0 && !slices.ContainsFunc(p.Protocol.Responses, func(r protocol.Response) bool { return pairs(r.Comparison, a.Comparison) }) || len(p.Protocol.Responses) == 0 && !pairs("", a.Comparison) {
		return
	}
	for f := range p.Factors {
		of := &p.Factors[f]
		if of.Values == nil || of.Protocol == nil || len(of.Levels) < 3 {
			continue
		}
		if a.DoseResponse != nil && a.DoseResponse.Factor == of.Name || slices.ContainsFunc(a.Contrasts, func(x protocol.Contrast) bool { return x.Factor == of.Name }) {
			continue
		}
		key := "analysis.trend"
		message, hint := prose.NoTrend(p, f)
		c.at(key, NoTrend, Warning, message, hint)
	}
}

// pairs tells whether a method compares all pairs; own is that of a response, which may
// leave it to the analysis.
func pairs(own, general string) bool {
	if own == "" {
		own = general
	}
	return own != "none" && own != "dunnett"
}

// primary finds several primary responses.
func (c *checker) primary() {
	var names []string
	second := -1
	for i, r := range c.plan.Protocol.Responses {
		if r.Role != "primary" {
			continue
		}
		names = append(names, prose.ResponseLabelText(&c.plan.Protocol.Responses[i]))
		if len(names) == 2 {
			second = i
		}
	}
	if len(names) > 1 {
		message, hint := prose.SeveralPrimary(names)
		c.at(fmt.Sprintf("response[%d].role", second), SeveralPrimary, Note, message, hint)
	}
}

// grouped finds animals that are kept in groups while each is an experimental unit of
// its own, and no unit stands for the group.
func (c *checker) grouped() {
	p := c.plan
	if p.Protocol.Animals == nil || p.Protocol.Housing == nil || p.Protocol.Housing.GroupSize < 2 {
		return
	}
	n := p.Protocol.Housing.GroupSize
	for u := range p.Units {
		unit := &p.Units[u]
		if len(unit.Receives) == 0 || unit.Crosses != nil || unit.Animals != nil || p.Protocol.Units[u].AnimalsColumn != "" {
			continue
		}
		group := false // a unit that holds as many, or that lies within this one
		for v := range p.Units {
			if v == u {
				continue
			}
			group = group || p.Coarse(v, u) != nil || p.Coarse(u, v) != nil && p.Units[v].N*n == p.Units[u].N
		}
		if !group {
			message, hint := prose.GroupHoused(p, u, n)
			c.at(unitKey(u), GroupHoused, Note, message, hint)
		}
	}
}

// carryOver finds units that receive one treatment after another with nothing planned
// for what is left behind.
func (c *checker) carryOver() {
	p := c.plan
	if p.Protocol.CarryOver != nil || p.Protocol.TimeTrend != nil {
		return
	}
	for u := range p.Units {
		unit := &p.Units[u]
		if len(unit.Crosses) != 2 || len(unit.Receives) == 0 {
			continue
		}
		x, y := unit.Crosses[0], unit.Crosses[1]
		tx, ty := prose.InTime(&p.Units[x]), prose.InTime(&p.Units[y])
		if tx == ty {
			continue
		}
		if tx {
			x, y = y, x
		}
		message, hint := prose.NoCarryOver(p, x, y, unit.Receives[0])
		c.at(unitKey(u), NoCarryOver, Note, message, hint)
	}
}

// moved finds events that moved animals.
func (c *checker) moved() {
	p := c.plan
	first, n := -1, 0
	for i, e := range p.Protocol.Events {
		if e.Kind == "move" {
			if n++; first < 0 {
				first = i
			}
		}
	}
	if n == 0 {
		return
	}
	e := p.Protocol.Events[first]
	unit, instance, bad := allot.NewFinder(p).Unit(e.Unit)
	if bad != nil {
		return // which reading the data says
	}
	message, hint := prose.Moved(p, unit, n, prose.InstanceText(p, unit, instance), e.On)
	c.at(fmt.Sprintf("event[%d]", first), Moved, Warning, message, hint)
}
