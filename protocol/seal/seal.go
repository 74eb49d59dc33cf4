// Package seal freezes the plan of a trial before the data, keeps the record of it, and
// says in the words of the trade what became of the plan since. A seal proves that the
// record agrees with itself; when it was made is the word of who made it.
package seal

import (
	"bytes"
	"cmp"
	"errors"
	"fmt"
	"io/fs"
	"strings"

	"github.com/BurntSushi/toml"

	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
)

// File is the record of the seals in a trial folder. It grows by appending only.
const File = "seal.toml"

// Entry is one seal.
type Entry struct {
	Number                  int // from 1
	By                      string
	On                      protocol.Date
	Plan                    []byte // protocol.CanonicalPlan
	SHA256                  string // of Plan
	Roster, Allotment, Data string // SHA-256 of the files that were there, else empty

	plan map[string]any
	line int // of its head in the record
}

// Seal is the record of a trial's seals with what was changed since.
type Seal struct {
	Entries []Entry
	// Revisions are the differences from each seal to the next and from the last to the
	// present plan, in that order.
	Revisions []Revision

	p       *protocol.Protocol
	present map[string]any
	before  *Entry       // the last seal made before there were data, nil: none was
	against []Difference // from there to the present
}

// Revision is a difference of the plan since a seal.
type Revision struct {
	Difference
	Since     int // number of the seal
	Amendment int // index of the amendment in the protocol that covers it, -1: none does
}

// Last is the newest seal.
func (s *Seal) Last() *Entry { return &s.Entries[len(s.Entries)-1] }

// Read reads the record of a folder and compares it with the present plan, and is nil
// if there is no record or it cannot be used. p is nil where the protocol has errors; the
// record is then looked at alone.
func Read(files *folder.Folder, p *protocol.Protocol) (*Seal, diag.List) {
	file, err := files.Read(File, folder.MaxFile)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, diag.List{{Pos: diag.Pos{File: File}, Code: protocol.Unreadable, Message: err.Error()}}
	}
	entries, list := parse(file.Data)
	if list.HasErrors() {
		return nil, list
	}
	s := &Seal{Entries: entries, p: p}
	for i := range s.Entries {
		if s.Entries[i].Data == "" {
			s.before = &s.Entries[i]
		}
	}
	if p == nil {
		return s, list
	}
	now, err := present(files, p)
	if err != nil {
		list.Add(diag.Diagnostic{Pos: diag.Pos{File: p.File}, Code: protocol.Unreadable, Message: err.Error()})
		return s, list
	}
	s.present = now.plan
	amended := amendments(p)
	for i := range s.Entries {
		next := now
		if i+1 < len(s.Entries) {
			next = &s.Entries[i+1]
		}
		for _, d := range s.between(&s.Entries[i], next) {
			s.Revisions = append(s.Revisions, Revision{Difference: d, Since: i + 1, Amendment: covers(amended, s.Entries[i].On, &d)})
		}
	}
	if s.before != nil {
		s.against = s.between(s.before, now)
	}
	return s, append(list, s.check()...)
}

// present is what would be sealed now.
func present(files *folder.Folder, p *protocol.Protocol) (*Entry, error) {
	e := &Entry{}
	var err error
	if e.Plan, err = p.CanonicalPlan(); err != nil {
		return nil, err
	}
	if e.plan, err = parsePlan(e.Plan); err != nil {
		return nil, err
	}
	e.SHA256 = folder.Hash(e.Plan)
	if p.Roster != nil {
		if e.Roster, err = hash(files, p.Roster.File); err != nil {
			return nil, err
		}
	}
	e.Allotment, err = hash(files, allot.File)
	return e, err
}

// between lists the differences of two seals. People who joined are none; nor are a
// roster and an allotment that were not there yet, and the default of a key that the
// program did not know when the first of them was made.
func (s *Seal) between(a, b *Entry) []Difference {
	var out []Difference
	for _, d := range compare(a.plan, b.plan) {
		joined := d.Kind == Added && d.Table == "person" && d.Field == ""
		unknown := d.Kind == Added && d.Field != "" && !s.p.Given(d.Key)
		if !joined && !unknown {
			out = append(out, d)
		}
	}
	file := func(key, what, field, old, new string) {
		if old == "" || old == new {
			return
		}
		d := Difference{Key: key, What: what, Field: field, Old: short(old), New: short(new)}
		if new == "" {
			d.Kind, d.Old, d.New = Removed, nil, nil
		}
		out = append(out, d)
	}
	file("roster.file", "content of the roster", "roster", a.Roster, b.Roster)
	file("randomization", "the allotment", "allotment", a.Allotment, b.Allotment)
	return out
}

// short shows the first hex digits of a hash.
func short(hash string) string {
	if len(hash) > 12 {
		return hash[:12] + "…"
	}
	return hash
}

// Changes are the writes that seal a trial as it is now: the entry at the end of the
// record. e gives By, On and Data; the rest is set here. It is an error to add to a
// record that is broken, and ErrSame to seal what is sealed already.
func Changes(files *folder.Folder, p *protocol.Protocol, e Entry) ([]folder.Change, error) {
	record, err := files.Read(File, folder.MaxFile)
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		return nil, err
	}
	var entries []Entry
	var list diag.List
	if err == nil {
		entries, list = parse(record.Data)
	}
	if list.HasErrors() {
		return nil, fmt.Errorf("%s: %s", list[0].Pos, list[0].Message)
	}
	now, err := present(files, p)
	if err != nil {
		return nil, err
	}
	e.Number, e.Plan, e.SHA256, e.Roster, e.Allotment = len(entries)+1, now.Plan, now.SHA256, now.Roster, now.Allotment
	if len(entries) > 0 {
		last := entries[len(entries)-1]
		switch {
		case last.SHA256 == e.SHA256 && last.Roster == e.Roster && last.Allotment == e.Allotment:
			return nil, ErrSame
		case e.On.Before(last.On):
			return nil, fmt.Errorf("the last seal is of %s, after %s", last.On, e.On)
		}
	}
	return []folder.Change{{Path: File, How: folder.Append, Data: e.bytes(record.Data), Old: record.SHA256}}, nil
}

// ErrSame says that there is nothing to seal.
var ErrSame = errors.New("nothing changed since the last seal")

// bytes is the entry as it stands in the record, above being what stands there.
func (e *Entry) bytes(above []byte) []byte {
	var b bytes.Buffer
	switch {
	case len(above) > 0 && !bytes.HasSuffix(above, []byte("\n")):
		b.WriteString("\n\n")
	case len(above) > 0:
		b.WriteByte('\n')
	}
	b.WriteString("[[seal]]\n")
	fmt.Fprintf(&b, "number = %d\n", e.Number)
	text := func(key, value string) {
		if value != "" {
			fmt.Fprintf(&b, "%s = %s\n", key, quote(value))
		}
	}
	text("by", e.By)
	if !e.On.IsZero() {
		fmt.Fprintf(&b, "on = %s\n", e.On)
	}
	text("roster", e.Roster)
	text("allotment", e.Allotment)
	text("data", e.Data)
	if plan := string(e.Plan); strings.Contains(plan, "'''") || strings.ContainsRune(plan, 0x7F) {
		text("plan", plan)
	} else {
		fmt.Fprintf(&b, "plan = '''%s'''\n", plan) // which nobody need unescape
	}
	text("sha256", e.SHA256)
	fmt.Fprintf(&b, "above = %s\n", quote(sum(append(bytes.Clone(above), b.Bytes()...))))
	return b.Bytes()
}

// sum is the fingerprint of a text, whichever way its lines end.
func sum(text []byte) string {
	return folder.Hash(bytes.ReplaceAll(text, []byte("\r\n"), []byte("\n")))
}

// quote writes a TOML basic string.
func quote(s string) string {
	var b strings.Builder
	b.WriteByte('"')
	for _, r := range strings.ToValidUTF8(s, "\uFFFD") {
		switch {
		case r == '"' || r == '\\':
			b.WriteByte('\\')
			b.WriteRune(r)
		case r < 0x20 || r == 0x7F:
			fmt.Fprintf(&b, `\u%04X`, r)
		default:
			b.WriteRune(r)
		}
	}
	b.WriteByte('"')
	return b.String()
}

// parse reads the record and proves that each entry is what was written: its last line
// holds the SHA-256 of all that stands above it.
func parse(data []byte) ([]Entry, diag.List) {
	var list diag.List
	add := func(line int, format string, args ...any) {
		list.Add(diag.Diagnostic{Pos: diag.Pos{File: File, Line: line, Col: 1}, Code: Broken, Message: fmt.Sprintf(format, args...),
			Hint: "the record grows by appending only; restore what stood there"})
	}
	type entry struct {
		Number    int    `toml:"number"`
		By        string `toml:"by"`
		On        any    `toml:"on"`
		Roster    string `toml:"roster"`
		Allotment string `toml:"allotment"`
		Data      string `toml:"data"`
		Plan      string `toml:"plan"`
		SHA256    string `toml:"sha256"`
		Above     string `toml:"above"`
	}
	var record struct {
		Seal []entry `toml:"seal"`
	}
	meta, err := decode(data, &record)
	if err != nil {
		line, message := 1, err.Error()
		var at toml.ParseError
		if errors.As(err, &at) {
			line, message = max(at.Position.Line, 1), at.Message
		}
		add(line, "%s", cmp.Or(strings.ReplaceAll(message, "\n", " "), "not a record of seals"))
		return nil, list
	}
	for _, k := range meta.Undecoded() {
		add(1, "unknown key %q", k.String())
	}
	heads, sums := scan(data)
	if len(heads) != len(record.Seal) || len(sums) != len(heads) || len(heads) == 0 {
		add(1, "the record is not as it was written: %d seals, %d heads and %d fingerprints", len(record.Seal), len(heads), len(sums))
		return nil, list
	}
	var entries []Entry
	for k, x := range record.Seal {
		line := heads[k].line
		e := Entry{Number: x.Number, By: x.By, Plan: []byte(x.Plan), SHA256: x.SHA256, Roster: x.Roster, Allotment: x.Allotment, Data: x.Data, line: line}
		switch on := x.On.(type) {
		case nil:
		case interface{ Format(string) string }:
			if _, err := fmt.Sscanf(on.Format("2006-01-02"), "%d-%d-%d", &e.On.Year, &e.On.Month, &e.On.Day); err != nil {
				add(line, "the day of seal %d is out of range", k+1)
			}
		default:
			add(line, "the day of seal %d is not a date", k+1)
		}
		if e.plan, err = parsePlan(e.Plan); err != nil {
			add(line, "the plan of seal %d cannot be read: %v", k+1, err)
		}
		switch {
		case x.Number != k+1:
			add(line, "seal %d stands where seal %d should", x.Number, k+1)
		case folder.Hash(e.Plan) != x.SHA256:
			add(line, "the plan of seal %d was changed: its fingerprint is not the one recorded", k+1)
		case !sums[k].last:
			add(sums[k].line, "something was added below the fingerprint of seal %d", k+1)
		case sum(data[:sums[k].offset]) != x.Above:
			add(line, "the record was changed in or above seal %d: its fingerprint is not the one recorded", k+1)
		}
		entries = append(entries, e)
	}
	return entries, list
}

// decode keeps a fault of the library from ending the program.
func decode(data []byte, into any) (meta toml.MetaData, err error) {
	defer func() {
		if r := recover(); r != nil {
			err = errors.New("this cannot be read as TOML")
		}
	}()
	return toml.Decode(string(data), into)
}

type mark struct {
	line, offset int
	last         bool // nothing follows it in its entry
}

// scan finds the heads of the entries and their last lines.
func scan(data []byte) (heads, sums []mark) {
	offset := 0
	for i, l := range bytes.SplitAfter(data, []byte("\n")) {
		m := mark{line: i + 1, offset: offset, last: true}
		switch text := bytes.TrimSpace(l); {
		case bytes.Equal(text, []byte("[[seal]]")):
			heads = append(heads, m)
		case bytes.HasPrefix(text, []byte("above = ")):
			sums = append(sums, m)
		case len(text) > 0 && len(sums) > 0 && len(sums) == len(heads):
			sums[len(sums)-1].last = false
		}
		offset += len(l)
	}
	return heads, sums
}
