// Package trial opens a trial folder and runs as many stages as the folder allows:
// protocol, plan, allotment, data. It is the only road into a trial.
package trial

import (
	"errors"
	"fmt"
	"io/fs"
	"slices"
	"strings"

	"penwright/analysis/dataset"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/protocol/layout"
	"penwright/protocol/seal"
	"penwright/protocol/welfare"
)

// ProtocolFile is the name of the protocol in a trial folder.
const ProtocolFile = "protocol.toml"

// The greatest sizes of a roster and of a template in bytes.
const (
	maxRoster   = 16 << 20
	maxTemplate = 1 << 20
)

// Trial is what a folder holds so far. Allotment and Table are nil until they exist.
// Welfare is what the animals came to beside published limits; nil without animals.
type Trial struct {
	Files     []folder.File // every file that was read, sorted by path
	Protocol  *protocol.Protocol
	Plan      *layout.Plan
	Welfare   []welfare.Finding
	Seal      *seal.Seal // nil: the plan was not sealed
	Allotment *allot.Allotment
	Roster    *allot.Roster // nil without one
	Table     *dataset.Table
	Said      diag.List // what Open said, for those who come later
}

// Open reads a trial as far as it goes and collects what is to be said of all stages,
// sorted by place. A stage whose input has errors is not run, and its part of the Trial
// is nil. With data but no allotment file, Allotment is what the data tell.
func Open(files *folder.Folder) (*Trial, diag.List) {
	t := &Trial{}
	list := t.open(files)
	t.Files = files.Files()
	list.Sort()
	// The roster is read for the draw and for the data, which say the same of it.
	list = slices.CompactFunc(list, func(a, b diag.Diagnostic) bool {
		return a.Pos == b.Pos && a.Code == b.Code && a.Message == b.Message
	})
	t.Said = list
	return t, list
}

func (t *Trial) open(files *folder.Folder) diag.List {
	p, list := protocol.Load(files, ProtocolFile)
	t.Protocol = p
	if p == nil {
		return list
	}
	whole := !list.HasErrors()
	for k := range p.Tables {
		read(files, p, fmt.Sprintf("table[%d].file", k), p.Tables[k].File, folder.MaxFile, &list)
	}
	if strings.ContainsAny(p.Report.Template, "./") { // a file; built-in templates have plain names
		read(files, p, "report.template", p.Report.Template, maxTemplate, &list)
	}
	if !whole {
		_, more := seal.Read(files, nil)
		return append(list, more...)
	}
	s, more := seal.Read(files, p)
	t.Seal = s
	list = append(list, more...)
	plan, more := layout.New(p)
	list = append(list, more...)
	if more.HasErrors() {
		return list
	}
	t.Plan = plan
	t.Welfare = welfare.Check(p, plan)
	list = append(list, welfare.Diagnostics(p, t.Welfare)...)
	if p.Roster != nil && p.Roster.File != "" {
		if file, ok := read(files, p, "roster.file", p.Roster.File, maxRoster, &list); ok {
			roster, more := allot.ReadRoster(file, plan)
			t.Roster = roster
			list = append(list, more...)
		}
	}
	a, more := allot.Read(files, plan)
	list = append(list, more...)
	if more.HasErrors() {
		return list
	}
	t.Allotment = t.withClasses(a)
	table, more := dataset.Read(files, plan, t.Allotment)
	list = append(list, more...)
	t.Table = table
	if table != nil {
		t.Allotment = table.Allotment
	}
	return list
}

// withClasses adds to an allotment the carried classes that only the roster tells.
func (t *Trial) withClasses(a *allot.Allotment) *allot.Allotment {
	if a == nil || t.Roster == nil {
		return a
	}
	full := *a
	full.Levels = append([][]int32(nil), a.Levels...)
	for f, levels := range t.Roster.Levels {
		if full.Levels[f] == nil {
			full.Levels[f] = levels
		}
	}
	return &full
}

// read reads a file that the protocol names.
func read(files *folder.Folder, p *protocol.Protocol, key, name string, limit int64, list *diag.List) (folder.File, bool) {
	if name == "" {
		return folder.File{}, false
	}
	file, err := files.Read(name, limit)
	if err == nil {
		return file, true
	}
	d := diag.Diagnostic{Pos: p.Pos(key), Key: key, Code: protocol.Unreadable, Message: err.Error()}
	if errors.Is(err, fs.ErrNotExist) {
		d.Message = fmt.Sprintf("there is no file %s in the trial folder", name)
	}
	list.Add(d)
	return folder.File{}, false
}
