// Package layout turns the units of a protocol and what each receives into a Plan:
// the instances of every unit, the strata with their degrees of freedom, the
// experimental units of each treatment term and the error it is tested over, the
// skeleton analysis, and the name the trade gives to the design.
//
// Nothing is looked up by the name of a design. Units and treatments are two sets of
// factors over the smallest units; strata, degrees of freedom and error terms follow
// from their algebra (Tjur 1984; Bailey 2008, ch. 10), and the name is recognised last.
package layout

import "penwright/protocol"

// Plan is the layout of a trial, fixed before the draw. It depends on counts alone.
type Plan struct {
	Protocol *protocol.Protocol

	Units    []Unit    // in the protocol's order
	Smallest int       // index of the unit whose instances are the rows of the plan
	Factors  []Factor  // treatment factors and carried classes, in the protocol's order
	Terms    []Term    // main effects first, then interactions, in the protocol's order
	Strata   []Stratum // one for each unit, in the protocol's order, coarse before fine
	Design   Design

	// Crossed holds the interactions of units that say interacts = true with the
	// treatment terms, unit by unit, terms in their order.
	Crossed []Crossed

	coarse      [][][]int32 // coarse[u][v]: instance of u → instance of v; nil unless v is u or coarser
	sup         [][]int     // sup[u][v]: the finest unit coarser than both or equal to one; -1: the whole trial
	allocations []*Allocation
	separate    []bool // separate[u]: the factors of u are drawn each by itself, main effects only
}

// Role says what a unit is for.
type Role int

// The roles of a unit.
const (
	Block        Role = iota // received nothing and holds units that do
	Experimental             // received a treatment, or is where an interaction of treatments lives
	Sampling                 // received nothing and lies within the smallest experimental unit
)

// Unit is a physical unit with all its instances, numbered from 0 in the order of the
// plan: parents in order, within a parent in order; for a crossing unit the first
// crossed unit slowest.
type Unit struct {
	Name, Label string
	Role        Role
	Within      int      // index of the parent unit, or -1
	Crosses     []int    // indices of the crossed units, or nil
	N           int      // number of instances
	Own         []string // name of each instance as the data write it; nil for a crossing unit, which has no column
	Receives    []int    // indices into Plan.Factors
	Carries     []int    // indices into Plan.Factors
	Animals     []int    // animals in each instance; nil: not stated
	Random      bool     // as methods state it for blocks = "auto", or overridden by the protocol
	Interacts   bool
}

// Factor is a treatment factor or a carried class as the plan sees it. Where treatments
// are listed, the factor "treatment" stands first with the codes as levels, and the
// factors it is made of follow with Unit = -1.
type Factor struct {
	Name, Label string
	Unit        int // index of the unit that receives or carries it; -1: none by itself
	Carried     bool
	Levels      []string
	Values      []float64        // nil: qualitative
	Control     []int            // indices of control levels
	Protocol    *protocol.Factor // nil for "treatment"
}

// Term is a treatment term: a main effect or an interaction.
type Term struct {
	Factors []int  // indices into Plan.Factors, ascending
	Name    string // names joined with a colon, in protocol order
	Unit    int    // its experimental unit
	Stratum int    // index into Plan.Strata: where it is tested when the draw is balanced; -1 when it cannot lie in one
	DF      int
	Over    int // index into Plan.Crossed of the interaction with a random unit it is tested over; -1: the residual
	ErrorDF int // degrees of freedom of what it is tested over; 0 when that is nothing or Inexact
	// Inexact tells that two errors act on the term at once, such as a random
	// interaction beside the residual of another stratum or a second such interaction,
	// so that no single mean square is its error.
	Inexact bool
}

// Crossed is the interaction of a unit with a treatment term, such as site:yeast.
type Crossed struct {
	Name    string // unit and term joined with a colon
	Unit    int    // the unit that interacts
	Term    int    // index into Plan.Terms
	Stratum int    // index into Plan.Strata
	DF      int
	Random  bool // the term is tested over it; else both over the residual
}

// Stratum is the space of one unit after all coarser ones.
type Stratum struct {
	Unit    int
	Name    string // the unit's name
	DF      int
	Terms   []int // indices into Plan.Terms of those that lie in it
	ErrorDF int   // DF less that of everything estimated in it, terms that share it
	// with coarser strata among them; negative when that is more than there is
}

// Design is what the trade calls the layout.
type Design struct {
	Name string // such as "randomized complete block"; never empty
	// Parts names qualifications that follow the name, such as "with sampling within units".
	Parts []string
}

// Coarse maps the instances of unit u to those of unit v, or is nil when v is neither
// u nor coarser than u.
func (p *Plan) Coarse(u, v int) []int32 { return p.coarse[u][v] }
