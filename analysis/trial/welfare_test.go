package trial

import (
	"slices"
	"strings"
	"testing"
	"testing/fstest"

	"penwright/protocol/diag"
	"penwright/protocol/folder"
	"penwright/protocol/welfare"
)

// What is outside a limit is a warning with its place; it stops nothing.
func TestWelfareIsSaid(t *testing.T) {
	files := good()
	files["protocol.toml"] += "[animals]\nspecies = \"pig\"\nmass_end = { value = 77, unit = \"kg\" }\n[housing]\nfloor_area = { value = 0.4, unit = \"m2\" }\n[welfare]\naim = \"commercial conditions\"\n"
	fsys := fstest.MapFS{}
	for name, text := range files {
		fsys[name] = &fstest.MapFile{Data: []byte(text)}
	}
	tr, list := Open(folder.FromFS(fsys))
	at := slices.IndexFunc(list, func(d diag.Diagnostic) bool { return d.Code == welfare.Space })
	if at < 0 || list[at].Severity != diag.Warning || list[at].Key != "housing.floor_area" || list[at].Pos.Line == 0 || !strings.HasSuffix(list[at].Hint, welfare.Deference) {
		t.Fatalf("the floor is not warned of: %v", list)
	}
	if list.HasErrors() || tr.Table == nil || len(tr.Welfare) == 0 {
		t.Error("a warning stopped the trial")
	}
}
