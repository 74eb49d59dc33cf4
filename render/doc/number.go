package doc

import (
	"fmt"
	"regexp"
	"strconv"
	"strings"
	"unicode"

	"golang.org/x/text/unicode/norm"

	"penwright/protocol/diag"
)

// The codes of what Number finds.
const (
	CodeDuplicateID     = "duplicate-id"
	CodeInvalidID       = "invalid-id"
	CodeUnknownRef      = "unknown-reference"
	CodeUnknownFootnote = "unknown-footnote"
)

// OwnID begins the identifiers that writers make for their own use; no node may have
// one.
const OwnID = "x_"

// safeID is what is valid as an identifier in HTML, SVG and PDF alike, without quoting.
var safeID = regexp.MustCompile(`^[A-Za-z][A-Za-z0-9_-]*$`)

// ID makes an identifier of the words of its parts: Latin letters without accents,
// digits and hyphens, in lower case, starting with a letter.
func ID(parts ...string) string {
	var b strings.Builder
	gap := false
	for _, r := range norm.NFKD.String(strings.Join(parts, " ")) {
		r = unicode.ToLower(r)
		switch {
		case r >= 'a' && r <= 'z' || r >= '0' && r <= '9':
			if gap && b.Len() > 0 {
				b.WriteByte('-')
			}
			gap = false
			b.WriteRune(r)
		case unicode.Is(unicode.Mn, r) || r == '\'' || r == '’':
		default:
			gap = true
		}
	}
	id := b.String()
	switch {
	case id == "":
		return "section"
	case id[0] <= '9':
		return "n" + id
	}
	return id
}

// target is what a Ref can point at.
type target struct {
	label string // "Table 3"; empty: it has no number
	pos   diag.Pos
}

// numbering is the state of one call of Number.
type numbering struct {
	list    diag.List
	targets map[string]target
	names   []string // the keys of targets in reading order
	taken   map[string]bool
	levels  []int // the levels of the headings that are open
	counts  []int
	tables  int
	figures int
	notes   int
}

// Number finishes a document: it gives headings without an ID one made of their text,
// closes gaps in the levels of headings (a 4 below a 2 becomes a 3; the outermost is 1),
// numbers headings, tables and figures, fills in what each Ref says and checks that
// identifiers are unique, that references and inner links have a target, and that every
// footnote called exists. A table is numbered if it has a caption or an ID, a figure
// always.
func Number(d *Document) diag.List {
	n := &numbering{targets: map[string]target{}, taken: map[string]bool{}, notes: len(d.Notes)}
	all := append([][]Block{d.Blocks}, d.Notes...)

	// What was named on purpose keeps its name; headings get what is left.
	for _, blocks := range all {
		Walk(blocks, func(node any) {
			switch b := node.(type) {
			case Heading:
				n.reserve(b.ID)
			case Table:
				n.reserve(b.ID)
			case Figure:
				n.reserve(b.ID)
			}
		})
	}
	count := Mapper{Block: n.number}
	resolve := Mapper{Inline: n.resolve}
	d.Blocks = count.Blocks(d.Blocks)
	notes := make([][]Block, len(d.Notes))
	for i, note := range d.Notes {
		notes[i] = count.Blocks(note)
	}
	d.Blocks = resolve.Blocks(d.Blocks)
	for i, note := range notes {
		notes[i] = resolve.Blocks(note)
	}
	d.Notes = notes
	return n.list
}

func (n *numbering) reserve(id string) {
	if id != "" {
		n.taken[id] = true
	}
}

func (n *numbering) number(b Block) Block {
	switch b := b.(type) {
	case Heading:
		if b.ID == "" {
			b.ID = n.free(ID(Plain(b.Text)))
		}
		b.Level, b.Number = n.heading(b.Level)
		n.declare(b.ID, "section "+b.Number, b.Pos)
		return b
	case Table:
		if b.ID == "" && len(b.Caption) == 0 {
			return b
		}
		n.tables++
		b.Number = strconv.Itoa(n.tables)
		n.declare(b.ID, "Table "+b.Number, b.Pos)
		return b
	case Figure:
		n.figures++
		b.Number = strconv.Itoa(n.figures)
		n.declare(b.ID, "Figure "+b.Number, b.Pos)
		return b
	}
	return b
}

// heading returns the level and the number of the next heading, written at a level.
func (n *numbering) heading(level int) (int, string) {
	open := 0
	for open < len(n.levels) && n.levels[open] < level {
		open++
	}
	// A heading that steps back to between two open levels, or further out than all
	// before it, takes the place of the one it closes.
	if open < len(n.levels) {
		n.levels = n.levels[:open+1]
		n.levels[open] = level
		n.counts = n.counts[:open+1]
		n.counts[open]++
	} else {
		n.levels = append(n.levels, level)
		n.counts = append(n.counts, 1)
	}
	digits := make([]string, len(n.counts))
	for i, c := range n.counts {
		digits[i] = strconv.Itoa(c)
	}
	return len(n.counts), strings.Join(digits, ".")
}

// free returns id, or the first of id-2, id-3, … that nobody has.
func (n *numbering) free(id string) string {
	unique := id
	for i := 2; n.taken[unique] || strings.HasPrefix(unique, OwnID); i++ {
		unique = id + "-" + strconv.Itoa(i)
	}
	n.taken[unique] = true
	return unique
}

func (n *numbering) declare(id, label string, pos diag.Pos) {
	if id == "" {
		return
	}
	if !safeID.MatchString(id) || strings.HasPrefix(id, OwnID) {
		n.list.Add(diag.Diagnostic{
			Pos: pos, Severity: diag.Error, Code: CodeInvalidID,
			Message: fmt.Sprintf("%q cannot be an identifier", id),
			Hint:    "write letters, digits, hyphens and underscores, starting with a letter, and not with " + OwnID,
		})
	}
	if first, ok := n.targets[id]; ok {
		n.list.Add(diag.Diagnostic{
			Pos: pos, Severity: diag.Error, Code: CodeDuplicateID,
			Message: fmt.Sprintf("the identifier %q is used twice", id),
			Related: []diag.Related{{Pos: first.pos, Message: "first used here, by " + first.label}},
		})
		return
	}
	n.targets[id] = target{label: label, pos: pos}
	n.names = append(n.names, id)
}

func (n *numbering) resolve(in Inline) Inline {
	switch in := in.(type) {
	case Ref:
		t, ok := n.targets[in.ID]
		switch {
		case !ok && in.Optional:
			return Text{Text: in.Text}
		case !ok:
			n.unknown(in.ID, in.Pos)
			in.Text = "[" + in.ID + "]"
			return in
		}
		in.Text = t.label
		return in
	case Link:
		if id, inner := strings.CutPrefix(in.Dest, "#"); inner {
			if _, ok := n.targets[id]; !ok {
				n.unknown(id, diag.Pos{})
			}
		}
		return in
	case FootnoteRef:
		if in.N < 1 || in.N > n.notes {
			n.list.Add(diag.Diagnostic{
				Severity: diag.Error, Code: CodeUnknownFootnote,
				Message: fmt.Sprintf("footnote %d is called, but the document has %d", in.N, n.notes),
			})
		}
		return in
	}
	return in
}

func (n *numbering) unknown(id string, pos diag.Pos) {
	d := diag.Diagnostic{
		Pos: pos, Severity: diag.Error, Code: CodeUnknownRef,
		Message: fmt.Sprintf("nothing in the document has the identifier %q", id),
	}
	if near := diag.Nearest(id, n.names); near != "" {
		d.Hint = fmt.Sprintf("did you mean %q?", near)
	}
	n.list.Add(d)
}
