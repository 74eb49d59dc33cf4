package sheet

import (
	"fmt"

	"penwright/protocol/diag"
)

// Faults collects what is said about a file of many rows. Of each code it keeps the
// first hundred and counts the rest, so that a million bad rows take no more memory
// than a hundred. The zero value is ready for use.
type Faults struct {
	list  diag.List
	count map[string]int
}

const kept = 100

// Add appends d, or counts it.
func (f *Faults) Add(d diag.Diagnostic) {
	if f.count == nil {
		f.count = map[string]int{}
	}
	if f.count[d.Code]++; f.count[d.Code] <= kept {
		f.list.Add(d)
	}
}

// AddAll appends every diagnostic of list, or counts it.
func (f *Faults) AddAll(list diag.List) {
	for _, d := range list {
		f.Add(d)
	}
}

// HasErrors tells whether an error was added.
func (f *Faults) HasErrors() bool { return f.list.HasErrors() }

// Has tells whether anything of a code was added.
func (f *Faults) Has(code string) bool { return f.count[code] > 0 }

// Full tells whether more of a code would only be counted.
func (f *Faults) Full(code string) bool { return f.count[code] >= kept }

// List gives what was kept, the last of each full code saying how many followed.
func (f *Faults) List() diag.List {
	last := map[string]int{}
	for i, d := range f.list {
		last[d.Code] = i
	}
	out := append(diag.List(nil), f.list...)
	for code, i := range last {
		if n := f.count[code] - kept; n > 0 {
			out[i].Message += fmt.Sprintf(" (and %d more of this kind)", n)
		}
	}
	return out
}
