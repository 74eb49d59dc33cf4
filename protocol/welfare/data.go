package welfare

import (
	"embed"
	"encoding/csv"
	"io"
	"slices"
	"strconv"
	"strings"
	"sync"
)

//go:embed data/*.csv
var files embed.FS

// Reading tells how a number came to be known. A number that was not read has none:
// see Recalled.
type Reading int

// The ways of reading.
const (
	Confirmed  Reading = iota // C: in the official text or a full copy of it
	SecondHand                // C2: in a policy or paper that reproduces it
)

// String gives the mark of r: C or C2.
func (r Reading) String() string {
	if r == SecondHand {
		return "C2"
	}
	return "C"
}

// Citation says where a row comes from. Seen is the day on which it was taken over
// from the checked list of values.
type Citation struct {
	Source       string // key of a Source
	Jurisdiction string
	Clause       string
	Seen         string // ISO 8601
	Reading      Reading
}

// Source is a document that rows were read in.
type Source struct{ Key, Title, Read, Address string }

// Limit is a published number. Only limits are compared with what a protocol states,
// and a limit has always been read: see Reading.
type Limit struct {
	Topic    string
	Aim      string // commercial conditions, laboratory; empty: both
	Species  string // species or groups, joined by |; any
	Class    string // of animal or of use; empty: all
	Quantity string
	Unit     string // as printed, in the spelling of UCUM where there is one
	Printed  string // the number as the list has it
	Note     string
	Citation

	value   float64
	most    bool // the value is the greatest allowed, else the least
	shown   bool // quoted, never applied
	band    band // of body mass, or the window of a sum over time
	animals band // numbers of animals it holds for
}

// Rule is a published statement in our words, without a number to compare.
type Rule struct {
	ID, Topic, Species, Text string
	Citation
}

// Recalled is something known from memory alone (M): it names what to look up and
// where, and holds no number, so that nothing can be compared with it.
type Recalled struct{ Topic, Species, What, Document, Jurisdiction, Reason, Recorded string }

// band is a range of numbers with its unit; the zero band holds everything.
type band struct {
	low, high         float64
	openLow, openHigh bool
	bounded           [2]bool
	unit              string
	text              string
}

// holds tells whether x, in the band's unit, is in the band.
func (b band) holds(x float64) bool {
	if b.bounded[0] && (x < b.low || b.openLow && x == b.low) {
		return false
	}
	return !b.bounded[1] || !(x > b.high || b.openHigh && x == b.high)
}

// words is the band as it is printed: "over 50 to 85 kg".
func (b band) words() string {
	unit := shown(b.unit)
	switch {
	case b.bounded == [2]bool{}:
		return ""
	case !b.bounded[0] && b.openHigh:
		return "under " + digits(b.high) + unit
	case !b.bounded[0]:
		return "up to " + digits(b.high) + unit
	case !b.bounded[1] && b.openLow:
		return "over " + digits(b.low) + unit
	case !b.bounded[1]:
		return "from " + digits(b.low) + unit
	}
	from, to := digits(b.low), " to "+digits(b.high)
	if b.openLow {
		from = "over " + from
	}
	if b.openHigh {
		to = " to under " + digits(b.high)
	}
	return from + to + unit
}

// parseBand reads comparisons and a unit: ">50 <=85 kg", "24 h".
func parseBand(s string) (band, bool) {
	b := band{text: s}
	for _, w := range strings.Fields(s) {
		op := w[:len(w)-len(strings.TrimLeft(w, "<>="))]
		x, err := strconv.ParseFloat(w[len(op):], 64)
		if err != nil {
			if op != "" || b.unit != "" {
				return b, false
			}
			b.unit = w
			continue
		}
		switch op {
		case ">", ">=":
			b.low, b.openLow, b.bounded[0] = x, op == ">", true
		case "<", "<=":
			b.high, b.openHigh, b.bounded[1] = x, op == "<", true
		case "":
			b.low, b.high, b.bounded = x, x, [2]bool{true, true}
		default:
			return b, false
		}
	}
	return b, s == "" || b.bounded != [2]bool{}
}

// tables are the embedded data.
type tables struct {
	limits   []Limit
	rules    []Rule
	recalled []Recalled
	sources  []Source
	species  []animal
	asked    []asked
}

// loaded reads the embedded data once.
var loaded = sync.OnceValue(func() *tables {
	t := &tables{}
	for _, name := range []string{"space", "care", "blood", "dose"} {
		for _, r := range rows(name, "topic", "aim", "species", "class", "band", "animals", "quantity", "sense", "value", "unit", "use", "source", "jurisdiction", "clause", "seen", "status", "note") {
			l := Limit{Topic: r[0], Aim: r[1], Species: r[2], Class: r[3], Quantity: r[6], Printed: r[8], Unit: r[9], Note: r[16],
				Citation: citation(r[11], r[12], r[13], r[14], r[15]), most: r[7] == "max", shown: r[10] == "show"}
			var ok [2]bool
			l.band, ok[0] = parseBand(r[4])
			l.animals, ok[1] = parseBand(r[5])
			x, err := strconv.ParseFloat(r[8], 64)
			if !ok[0] || !ok[1] || err != nil || !slices.Contains([]string{"min", "max", "value"}, r[7]) || r[10] != "show" && r[10] != "compare" {
				panic("welfare: a row of the embedded limits cannot be read")
			}
			l.value = x
			t.limits = append(t.limits, l)
		}
	}
	for _, r := range rows("rules", "id", "topic", "species", "text", "source", "jurisdiction", "clause", "seen", "status") {
		t.rules = append(t.rules, Rule{ID: r[0], Topic: r[1], Species: r[2], Text: r[3], Citation: citation(r[4], r[5], r[6], r[7], r[8])})
	}
	for _, r := range rows("recalled", "topic", "species", "what", "document", "jurisdiction", "reason", "recorded", "status") {
		if r[7] != "M" {
			panic("welfare: a row from memory is not marked M")
		}
		t.recalled = append(t.recalled, Recalled{Topic: r[0], Species: r[1], What: r[2], Document: r[3], Jurisdiction: r[4], Reason: r[5], Recorded: r[6]})
	}
	for _, r := range rows("sources", "key", "title", "read", "address") {
		t.sources = append(t.sources, Source{Key: r[0], Title: r[1], Read: r[2], Address: r[3]})
	}
	for _, r := range rows("species", "species", "words", "groups") {
		t.species = append(t.species, animal{name: r[0], words: strings.Split(r[1], "|"), groups: strings.Split(r[2], "|")})
	}
	t.asked = readGuidelines()
	return t
})

func citation(source, jurisdiction, clause, seen, status string) Citation {
	c := Citation{Source: source, Jurisdiction: jurisdiction, Clause: clause, Seen: seen}
	switch status {
	case "C":
	case "C2":
		c.Reading = SecondHand
	default:
		panic("welfare: a row that was not read stands among those that were")
	}
	return c
}

// rows reads an embedded table and checks its head.
func rows(name string, head ...string) [][]string {
	f, err := files.Open("data/" + name + ".csv")
	if err != nil {
		panic("welfare: an embedded table is missing")
	}
	r := csv.NewReader(f)
	if first, err := r.Read(); err != nil || !slices.Equal(first, head) {
		panic("welfare: an embedded table has another head")
	}
	var out [][]string
	for {
		row, err := r.Read()
		if err == io.EOF {
			return out
		}
		if err != nil {
			panic("welfare: an embedded table cannot be read")
		}
		out = append(out, row)
	}
}

// Limits gives every published number, in the order of the data.
func Limits() []Limit { return slices.Clone(loaded().limits) }

// Rules gives every published statement without a number, in the order of the data.
func Rules() []Rule { return slices.Clone(loaded().rules) }

// SourceOf gives the document of a citation.
func SourceOf(c Citation) Source {
	for _, s := range loaded().sources {
		if s.Key == c.Source {
			return s
		}
	}
	return Source{Key: c.Source, Title: c.Source}
}

// rule gives the rule of an id.
func rule(id string) Rule {
	for _, r := range loaded().rules {
		if r.ID == id {
			return r
		}
	}
	panic("welfare: there is no such rule")
}

// tolerance keeps the rounding of a conversion from turning an equality round.
const tolerance = 1e-9

// met tells whether x, in the unit of l, keeps to it.
func (l *Limit) met(x float64) bool { return meets(x, l.value, l.most) }

func meets(x, value float64, most bool) bool {
	if most {
		return x <= value*(1+tolerance)
	}
	return x >= value*(1-tolerance)
}
