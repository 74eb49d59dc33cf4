// Package trial opens a trial folder and runs as many stages as the folder allows:
// protocol, plan, allotment, data. It is the only road into a trial.
package trial

import (
	"penwright/analysis/dataset"
	"penwright/protocol"
	"penwright/protocol/allot"
	"penwright/protocol/folder"
	"penwright/protocol/layout"
)

// Trial is what a folder holds so far. Allotment and Table are nil until they exist.
type Trial struct {
	Files     []folder.File // every file that was read, sorted by path
	Protocol  *protocol.Protocol
	Plan      *layout.Plan
	Allotment *allot.Allotment
	Table     *dataset.Table
}
