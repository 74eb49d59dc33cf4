package main

import (
	"errors"
	"fmt"
	"io/fs"
	"path/filepath"
	"strconv"
	"strings"
	"syscall"
	"time"

	"penwright/analysis/trial"
	"penwright/protocol"
	"penwright/protocol/diag"
	"penwright/protocol/folder"
)

// trialArg is the folder that an argument names: a folder, or its protocol.toml.
func trialArg(args []string) string {
	if len(args) == 0 {
		return "."
	}
	if filepath.Base(args[0]) == trial.ProtocolFile {
		return filepath.Dir(args[0])
	}
	return args[0]
}

// opened is a trial folder with what was found in it.
type opened struct {
	dir    string
	folder *folder.Folder
	trial  *trial.Trial
	list   diag.List
}

// open reads a trial folder. A folder that cannot be read is an error of status 3.
func (a *app) open(dir string) (*opened, error) {
	f, err := folder.Open(dir)
	if err != nil {
		return nil, failed(cause(dir, err))
	}
	f.Step = a.step
	switch info, err := fs.Stat(f, trial.ProtocolFile); {
	case errors.Is(err, fs.ErrNotExist):
		_ = f.Close() // it was only read
		return nil, failed(fmt.Errorf("%s holds no protocol.toml; a trial folder does (penwright demo makes one to look at)", dir))
	case err != nil:
		_ = f.Close() // it was only read
		return nil, failed(cause(filepath.Join(dir, trial.ProtocolFile), err))
	case !info.Mode().IsRegular():
		_ = f.Close() // it was only read
		return nil, failed(fmt.Errorf("%s is no file", filepath.Join(dir, trial.ProtocolFile)))
	}
	t, list := trial.Open(f)
	for _, d := range list {
		if t.Protocol == nil && d.Code == protocol.Unreadable {
			_ = f.Close() // it was only read
			return nil, failed(fmt.Errorf("%s: %s", filepath.Join(dir, d.Pos.File), d.Message))
		}
	}
	return &opened{dir: dir, folder: f, trial: t, list: list}, nil
}

func (o *opened) close() { _ = o.folder.Close() } // what was written was synced before

// cause words the error of a path as people say it.
func cause(path string, err error) error {
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return fmt.Errorf("there is no folder %s", path)
	case errors.Is(err, fs.ErrPermission):
		return fmt.Errorf("%s: permission denied", path)
	case errors.Is(err, syscall.ENOTDIR):
		return fmt.Errorf("%s is no folder", path)
	}
	var of *fs.PathError
	if errors.As(err, &of) { // the path is said already
		err = of.Err
	}
	return fmt.Errorf("%s cannot be opened: %w", path, err)
}

// sources gives the text of the files that diagnostics point into.
func (o *opened) sources() func(file string) []byte {
	text := map[string][]byte{}
	for _, f := range o.folder.Files() {
		text[f.Path] = f.Data
	}
	prefix := o.prefix()
	return func(file string) []byte { return text[strings.TrimPrefix(file, prefix)] }
}

// prefix is put before the paths of diagnostics, so that editors find the files.
func (o *opened) prefix() string {
	if o.dir == "." {
		return ""
	}
	return filepath.ToSlash(filepath.Clean(o.dir)) + "/"
}

// placed gives the diagnostics with paths as seen from where the command runs.
func (o *opened) placed(list diag.List) diag.List {
	prefix := o.prefix()
	out := make(diag.List, len(list))
	for i, d := range list {
		if d.Pos.File != "" {
			d.Pos.File = prefix + d.Pos.File
		}
		related := make([]diag.Related, len(d.Related))
		for k, r := range d.Related {
			if r.Pos.File != "" {
				r.Pos.File = prefix + r.Pos.File
			}
			related[k] = r
		}
		d.Related = related
		out[i] = d
	}
	return out
}

// complain writes diagnostics to standard error; quiet keeps errors only.
func (a *app) complain(o *opened, list diag.List) {
	if a.quiet {
		var errs diag.List
		for _, d := range list {
			if d.Severity == diag.Error {
				errs = append(errs, d)
			}
		}
		list = errs
	}
	if len(list) > 0 {
		a.write(a.err, o, list)
	}
}

// latest is the last date that the protocol mentions: the date a report bears unless
// another one is given, so that the clock has no part in it.
func latest(p *protocol.Protocol) string {
	best := ""
	see := func(ds ...protocol.Date) {
		for _, d := range ds {
			if d.Year == 0 {
				continue
			}
			if s := fmt.Sprintf("%04d-%02d-%02d", d.Year, d.Month, d.Day); s > best {
				best = s
			}
		}
	}
	see(p.Randomization.On)
	if p.Data != nil { // without data the trial lies ahead
		see(p.Trial.Start, p.Trial.End)
	}
	if p.Approval != nil {
		see(p.Approval.Date)
	}
	if p.Blinding != nil {
		see(p.Blinding.Unblinded)
	}
	if p.Data != nil {
		see(p.Data.Locked)
	}
	for _, x := range p.Corrections {
		see(x.On, x.Recorded)
	}
	for _, x := range p.Exclusions {
		see(x.On)
	}
	for _, x := range p.Events {
		see(x.On)
	}
	for _, x := range p.Deviations {
		see(x.On)
	}
	for _, x := range p.Amendments {
		see(x.On)
	}
	for _, x := range p.Signatures {
		see(x.On)
	}
	return best
}

// reportDate is the date a report bears: that of SOURCE_DATE_EPOCH if it is set, else
// the last one the trial mentions.
func (a *app) reportDate(p *protocol.Protocol) (string, error) {
	if s := a.getenv("SOURCE_DATE_EPOCH"); s != "" {
		seconds, err := strconv.ParseInt(s, 10, 64)
		if err != nil {
			return "", status{code: misuse, err: fmt.Errorf("SOURCE_DATE_EPOCH is %q, not a number of seconds", s)}
		}
		return time.Unix(seconds, 0).UTC().Format("2006-01-02"), nil
	}
	return latest(p), nil
}
