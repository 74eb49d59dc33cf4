package prose

import (
	"fmt"
	"slices"
	"strings"

	"penwright/analysis/num"
	"penwright/analysis/result"
	"penwright/analysis/trial"
	"penwright/protocol/welfare"
)

// State is how far an item of a guideline, or a part of one, is answered.
type State int

// The states. Unprinted is stated in the protocol, but nowhere in the report at hand;
// Waiting needs data or a draw that are not there yet; Inapplicable does not concern the
// trial.
const (
	Missing State = iota
	Waiting
	Unprinted
	Partly
	Answered
	Inapplicable
)

// String gives the word for s.
func (s State) String() string {
	return []string{"missing", "waits", "not in this report", "in part", "answered", "not applicable"}[s]
}

// Checklist is a guideline held to one report.
type Checklist struct {
	Name  string
	Plan  bool // only what a plan can answer
	Items []Item
}

// Item is one item of a guideline and how the report answers it.
type Item struct {
	welfare.Item
	Parts []Part
}

// Part is one of the things that an item asks for. Its State is Missing, Waiting, Answered
// or Inapplicable, and, once its place was looked for, perhaps Unprinted.
type Part struct {
	What     string
	Optional bool
	State    State
	Says     string        // the answer where it is worked out, or why there is none; lower case, without a period
	Lacks    []string      // of which of several things it is missing
	Keys     []welfare.Key // what would answer it

	// What a report must hold for the answer to stand in it: each of Texts somewhere, the
	// places of Items first; each of Tables, where a name that ends in a hyphen stands for
	// all that begin so; a section under one of Sections with one of each set of Stems.
	Texts    []string
	Tables   []Sought
	Sections []string
	Stems    [][]string
	Where    []string // identifiers of where it stands
}

// Sought is a table or section that must be there, for one response where Response is not
// empty: any of Names, or one of Also that speaks of it.
type Sought struct {
	Response string
	Names    []string
	Also     []Spoken
}

// Spoken is a table or section that other things stand in too: Name, which may end in a
// hyphen, with words that begin with one of Stems.
type Spoken struct {
	Name  string
	Stems []string
}

// Checklists holds the guidelines that concern a trial to what is known of it. Where the
// answers stand in a report is not known yet: the parts say what to look for. Texts of
// fewer than three words, and words that only hold a place, answer nothing.
func Checklists(t *trial.Trial, rs *result.Results, plan bool) []Checklist {
	v := &evidence{t: t, p: t.Protocol, rs: rs, plan: plan}
	var out []Checklist
	for _, g := range welfare.Guidelines(t.Protocol) {
		c := Checklist{Name: g.Name, Plan: plan}
		for _, asked := range g.Items {
			if plan && !asked.Plan {
				continue
			}
			x := Item{Item: asked}
			for i := range asked.Parts {
				x.Parts = append(x.Parts, v.part(&asked.Parts[i]))
			}
			c.Items = append(c.Items, x)
		}
		out = append(out, c)
	}
	return out
}

// State is that of the whole item: optional parts do not count, nor does what does not
// concern the trial.
func (x *Item) State() State {
	var n [Inapplicable + 1]int
	asked := 0
	for i := range x.Parts {
		p := &x.Parts[i]
		if p.Optional && len(x.Parts) > 1 {
			continue
		}
		if p.State == Answered && len(p.Lacks) > 0 {
			n[Partly]++
		} else {
			n[p.State]++
		}
		if p.State != Inapplicable {
			asked++
		}
	}
	switch {
	case asked == 0:
		return Inapplicable
	case n[Answered] == asked:
		return Answered
	case n[Waiting] > 0 && n[Answered]+n[Waiting] == asked:
		return Waiting
	case n[Answered]+n[Partly] > 0:
		return Partly
	case n[Missing] > 0 && n[Unprinted] > 0:
		return Partly
	case n[Missing] > 0:
		return Missing
	case n[Waiting] > 0:
		return Waiting
	}
	return Unprinted
}

// part looks for the answer to one part.
func (v *evidence) part(asked *welfare.Part) Part {
	out := Part{What: asked.What, Optional: asked.Optional, Keys: asked.Keys}
	if asked.Computed != "" {
		f := computed[asked.Computed]
		if f == nil {
			panic("prose: a guideline asks for what is not worked out")
		}
		f(v, &out)
		return out
	}
	if asked.Sections != nil {
		out.Sections = asked.Sections
		if asked.Stems != nil {
			out.Stems = [][]string{asked.Stems}
		}
		if asked.Animals {
			out.Stems = v.animalWords()
		}
		if v.t.Table == nil {
			out.State, out.Says = Waiting, noData
		}
		return out
	}
	for _, k := range asked.Keys {
		v.key(k, &out)
		if out.State == Answered {
			return out
		}
	}
	return out
}

// key takes the answer of one key into a part. Of the elements of a list all must answer.
func (v *evidence) key(k welfare.Key, out *Part) {
	values, known := v.stated(k.Name)
	if !known {
		return
	}
	var lacks, texts []string
	for _, x := range values {
		if x.number || adequate(x.text, k) {
			if !x.unseen {
				texts = append(texts, x.text)
			}
			continue
		}
		if x.of == "" && strings.TrimSpace(x.text) != "" {
			out.Says = fmt.Sprintf("“%s” says too little", clip(x.text))
		}
		if x.of != "" {
			lacks = append(lacks, "for "+x.of)
		}
	}
	if good := len(values) - len(lacks); len(values) > 0 && (len(lacks) == 0 && len(texts) > 0 || len(lacks) > 0 && good > 0 || values[0].unseen && values[0].number) {
		out.State, out.Says, out.Lacks, out.Texts = Answered, "", lacks, texts
		return
	}
	if len(lacks) > 0 {
		out.Lacks = lacks
	}
}

// clip shortens a text of the protocol that is quoted in a verdict.
func clip(s string) string {
	r := []rune(strings.Join(strings.Fields(s), " "))
	if len(r) > 40 {
		return string(r[:39]) + "…"
	}
	return string(r)
}

// fillers are words that do not make a held place a statement.
var fillers = []string{"the", "a", "an", "here", "yet", "later", "still", "please", "as", "be", "to", "is", "are", "it", "see", "in", "on", "of", "and", "or", "this", "that", "will", "we", "not", "no", "for", "at", "by", "any", "so", "same", "was", "were"}

// held are words that only hold a place; a text of such and of fillers says nothing.
var held = []string{"none", "n", "na", "nil", "null", "tbd", "tba", "tbc", "todo", "fixme", "xxx", "xx", "applicable", "available", "known", "unknown", "stated", "given",
	"decided", "determined", "done", "announced", "added", "completed", "confirmed", "written", "filled", "fill", "write", "insert", "text", "usual", "before", "above", "below",
	"standard", "normal", "normally", "etc", "ditto", "idem", "placeholder", "lorem", "ipsum", "dolor", "sit", "amet", "something", "anything", "whatever", "blah", "foo", "bar", "test", "yes", "ok"}

// elsewhere are words that begin a text which only refers to another.
var elsewhere = [][]string{{"see"}, {"as", "published"}, {"as", "described"}, {"as", "usual"}, {"as", "before"}, {"as", "above"}, {"as", "below"}, {"as", "in"}, {"same", "as"}, {"the", "same", "as"}, {"to", "be"}}

// adequate tells whether a text says something: a fact is more than a held place, other
// texts have three different words or more that are not all held places or fillers, and a
// sentence six words. What only refers elsewhere, or is still to be, says nothing.
func adequate(s string, k welfare.Key) bool {
	words, signs := wordsOf(s)
	for _, e := range elsewhere {
		if len(words) >= len(e) && slices.Equal(words[:len(e)], e) {
			return false
		}
	}
	seen := map[string]bool{}
	meaning := 0
	for _, w := range words {
		if seen[w] {
			continue
		}
		seen[w] = true
		if !slices.Contains(held, w) && !slices.Contains(fillers, w) && !oneSign(w) {
			meaning++
		}
	}
	n := max(len(seen), signs/2) // of writing without spaces two signs make a word
	switch {
	case meaning == 0 && signs == 0:
		return false
	case k.Fact:
		return n >= 1
	case k.Sentence:
		return n >= 6
	}
	return n >= 3
}

// wordsOf splits a text into lower-case words that hold a letter or digit, and counts the
// signs of scripts that are written without spaces.
func wordsOf(s string) (words []string, signs int) {
	return strings.FieldsFunc(strings.ToLower(s), func(r rune) bool { return !letter(r) && !digit(r) }), different(s)
}

// Coverage sums up a checklist whose places were looked for.
func Coverage(c *Checklist) []string {
	var by [Inapplicable + 1][]string
	total := 0
	for i := range c.Items {
		x := &c.Items[i]
		s := x.State()
		by[s] = append(by[s], x.Number)
		if s != Inapplicable {
			total++
		}
	}
	what := "items of " + c.Name + " that concern this trial"
	switch {
	case c.Name == "Field trials" && c.Plan:
		what = "points that readers of field trials ask for and a plan can answer"
	case c.Name == "Field trials":
		what = "points that readers of field trials ask for"
	case c.Plan:
		what = "items of " + c.Name + " that a plan can answer and that concern this trial"
	}
	parts := []string{are(len(by[Answered])) + " answered"}
	list := func(of State, one, more string) {
		if n := len(by[of]); n == 1 {
			parts = append(parts, fmt.Sprintf("1 %s (%s)", one, by[of][0]))
		} else if n > 1 {
			parts = append(parts, fmt.Sprintf("%s %s (%s)", num.Count(n), more, strings.Join(by[of], ", ")))
		}
	}
	list(Partly, "is answered in part", "are answered in part")
	list(Missing, "is missing", "are missing")
	list(Unprinted, "is known, but not in this report", "are known, but not in this report")
	list(Waiting, "waits for the draw or the data", "wait for the draw or the data")
	s := []string{fmt.Sprintf("Of the %s %s %s.", num.Count(total), what, And(parts))}
	if len(by[Partly])+len(by[Missing]) > 0 {
		s = append(s, "A gap is no error of the trial: the key of the protocol that would close it stands beside it.")
	}
	return s
}

func are(n int) string {
	if n == 1 {
		return "1 is"
	}
	return num.Count(n) + " are"
}

const forReaders = "Answered means that the report says it; whether it says it well is for its readers."

// GuidelineNotes say where the items of a checklist were read.
func GuidelineNotes(c *Checklist) []string {
	if len(c.Items) == 0 {
		return nil
	}
	first := &c.Items[0]
	if first.Mark == "M" {
		return []string{"Common practice, no source: what readers of field trials usually ask for, from memory (M). " + forReaders}
	}
	var sources, memory []string
	marks := map[string]bool{}
	for i := range c.Items {
		x := &c.Items[i]
		title := welfare.SourceOf(welfare.Citation{Source: x.Source}).Title
		if !slices.Contains(sources, title) {
			sources = append(sources, title)
		}
		if x.Memory != "" {
			memory = append(memory, x.Number)
		}
		marks[x.Mark] = true
	}
	s := "Numbers as in the guideline, words ours"
	if marks["C2"] {
		s += "; read at second hand (C2)"
	} else {
		s += "; read in its tables (C)"
	}
	out := []string{s + ". " + strings.Join(sources, ". ") + ".", forReaders}
	if len(memory) > 0 {
		out = append(out, "That items "+And(memory)+" ask for each level is from memory (M): look it up in the guideline.")
	}
	return out
}
