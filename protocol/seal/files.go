package seal

import (
	"errors"
	"io/fs"
	"slices"

	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/folder"
)

// CompareFiles lists the files of two trials, beside the protocol and the texts that are
// part of it, that differ in content: the allotment, the roster, tables and data.
func CompareFiles(old *folder.Folder, p *protocol.Protocol, new *folder.Folder, q *protocol.Protocol) ([]Difference, error) {
	var out []Difference
	for _, r := range roles(p, q) {
		a, err := hash(old, r.name)
		if err != nil {
			return nil, err
		}
		b, err := hash(new, r.name)
		if err != nil {
			return nil, err
		}
		if a == b {
			continue
		}
		d := Difference{Key: r.key, What: r.what + " " + r.name, Kind: Changed, Old: short(a), New: short(b)}
		switch {
		case a == "":
			d.Kind, d.Old, d.New = Added, nil, nil
		case b == "":
			d.Kind, d.Old, d.New = Removed, nil, nil
		}
		out = append(out, d)
	}
	return out, nil
}

// role is a file with the key that names it.
type role struct{ key, what, name string }

// roles lists the files that two protocols name, each once.
func roles(all ...*protocol.Protocol) []role {
	list := []role{{key: "randomization", what: "allotment", name: allot.File}}
	add := func(key, what, name string) {
		if name != "" && !slices.ContainsFunc(list, func(r role) bool { return r.name == name }) {
			list = append(list, role{key: key, what: what, name: name})
		}
	}
	for _, p := range all {
		if p.Roster != nil {
			add("roster.file", "roster", p.Roster.File)
		}
		for _, t := range p.Tables {
			add("table", "table", t.File)
		}
		if p.Data != nil {
			add("data.file", "data", p.Data.File)
			for _, f := range p.Data.Further {
				add("data.further", "data", f.File)
			}
		}
	}
	return list
}

// hash is the SHA-256 of a file, empty if there is none.
func hash(files *folder.Folder, name string) (string, error) {
	if name == "" {
		return "", nil
	}
	f, err := files.Read(name, folder.MaxFile)
	if errors.Is(err, fs.ErrNotExist) {
		return "", nil
	}
	return f.SHA256, err
}
