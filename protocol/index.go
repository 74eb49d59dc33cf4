package protocol

import (
	"penwright/protocol/diag"
	"penwright/protocol/internal/tomlpos"
)

// keyIndex knows where the keys of a protocol file stand.
type keyIndex struct{ doc *tomlpos.Doc }

// Pos returns the position of a dotted key such as unit[1].count, indexes counted
// from 0. If the file does not state it, it is that of the nearest enclosing table
// that the file has, or of the file.
func (p *Protocol) Pos(key string) diag.Pos {
	pos, _ := p.find(key, false)
	return pos
}

// ValuePos returns the position of the value of a dotted key, which may be an
// element of a list such as factor[0].levels[2]. It falls back as Pos does.
func (p *Protocol) ValuePos(key string) diag.Pos {
	pos, _ := p.find(key, true)
	return pos
}

// Given tells whether the file states a dotted key, so that defaults can be told
// from statements.
func (p *Protocol) Given(key string) bool {
	_, ok := p.find(key, false)
	return ok
}

func (p *Protocol) find(key string, value bool) (diag.Pos, bool) {
	if p.index.doc == nil {
		return diag.Pos{File: p.File}, false
	}
	n, found := p.index.doc.Find(key)
	switch {
	case n == p.index.doc.Root:
		return diag.Pos{File: p.File}, found
	case found && value:
		return p.index.doc.At(int(n.Value)), true
	}
	return p.index.doc.At(int(n.Key)), found
}

// Factor returns the factor of that name, or nil.
func (p *Protocol) Factor(name string) *Factor {
	for i := range p.Factors {
		if p.Factors[i].Name == name {
			return &p.Factors[i]
		}
	}
	return nil
}

// Unit returns the unit of that name, or nil.
func (p *Protocol) Unit(name string) *Unit {
	for i := range p.Units {
		if p.Units[i].Name == name {
			return &p.Units[i]
		}
	}
	return nil
}

// Response returns the response of that name, or nil.
func (p *Protocol) Response(name string) *Response {
	for i := range p.Responses {
		if p.Responses[i].Name == name {
			return &p.Responses[i]
		}
	}
	return nil
}

// Covariate returns the covariate of that name, or nil.
func (p *Protocol) Covariate(name string) *Covariate {
	for i := range p.Covariates {
		if p.Covariates[i].Name == name {
			return &p.Covariates[i]
		}
	}
	return nil
}

// RepeatedNamed returns the set of times of that name, or nil.
func (p *Protocol) RepeatedNamed(name string) *Repeated {
	for i := range p.Repeated {
		if p.Repeated[i].Name == name {
			return &p.Repeated[i]
		}
	}
	return nil
}
