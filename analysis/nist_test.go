package analysis

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"
)

// digits is the number of correct digits.
func digits(got, want float64) float64 {
	if got == want {
		return 17
	}
	return -math.Log10(math.Abs(got-want) / math.Abs(want))
}

// oneWayTrial writes groups of values, as they are printed, as a trial.
func oneWayTrial(groups [][]string) fstest.MapFS {
	var levels []string
	var data strings.Builder
	data.WriteString("specimen,cell,y\n")
	n := 0
	for g, values := range groups {
		levels = append(levels, fmt.Sprintf("\"cell %d\"", g+1))
		for _, v := range values {
			n++
			fmt.Fprintf(&data, "%d,cell %d,%s\n", n, g+1, v)
		}
	}
	protocol := fmt.Sprintf("protocol = 1\n[trial]\ncode = \"S\"\ntitle = \"One way\"\nobjective = \"Accuracy.\"\n[randomization]\nmethod = \"as published\"\n"+
		"[[factor]]\nname = \"cell\"\nlevels = [%s]\n[[unit]]\nname = \"specimen\"\ncount = %d\nreceives = [\"cell\"]\n"+
		"[analysis]\ncomparison = \"none\"\n[[response]]\nname = \"y\"\nkind = \"continuous\"\n[data]\nfile = \"data.csv\"\n", strings.Join(levels, ", "), n)
	return fstest.MapFS{"protocol.toml": &fstest.MapFile{Data: []byte(protocol)}, "data.csv": &fstest.MapFile{Data: []byte(data.String())}}
}

// The reference data sets for one-way analysis of variance of the National Institute of
// Standards and Technology (Statistical Reference Datasets, public domain), from the text of
// a file to the results: certified F and sums of squares. The simulated sets are made by
// their rule: nine cells, each its centre, then pairs a tenth below and above, for which F is
// the number of values of a cell. A float64 holds no more digits of the higher ones.
func TestReferenceDatasets(t *testing.T) {
	type set struct {
		name                string
		groups              [][]string
		f, between, within  float64
		inF, inSS, inWithin float64
	}
	sets := []set{{
		name: "SiRstv",
		groups: [][]string{
			strings.Fields("196.3052 196.1240 196.1890 196.2569 196.3403"), strings.Fields("196.3042 196.3825 196.1669 196.3257 196.0422"),
			strings.Fields("196.1303 196.2005 196.2889 196.0343 196.1811"), strings.Fields("196.2795 196.1748 196.1494 196.1485 195.9885"),
			strings.Fields("196.2119 196.1051 196.1850 196.0052 196.2090"),
		},
		f: 1.18046237440255, between: 5.11462616e-2, within: 2.16636560e-1, inF: 12, inSS: 11, inWithin: 11,
	}}
	weights := set{name: "AtmWtAg", f: 15.9467335677930, between: 3.63834187500e-9, within: 1.04951729166667e-8, inF: 9.5, inSS: 9.5, inWithin: 9.5}
	for _, g := range []string{
		"1568 1465 1572 1785 1446 1903 1526 1494 1616 1587 1519 1486 1419 1569 1508 1672 1385 1518 1662 1424 1360 1333 1610 1477",
		"1079 1344 1513 1197 1604 1385 1642 1365 1151 1082 1517 1448 1198 1482 1334 1609 1101 1512 1469 1360 1254 1261 1450 1368",
	} {
		var values []string
		for _, v := range strings.Fields(g) {
			values = append(values, "107.868"+v)
		}
		weights.groups = append(weights.groups, values)
	}
	sets = append(sets, weights)
	for k, c := range []struct {
		base   string
		n      int
		digits float64
	}{
		{"", 21, 13}, {"", 201, 13}, {"", 2001, 13}, {"100000", 21, 9.5}, {"100000", 201, 9.5}, {"100000", 2001, 9.5},
		{"100000000000", 21, 3.5}, {"100000000000", 201, 3.5}, {"100000000000", 2001, 3.5},
	} {
		s := set{name: fmt.Sprintf("SmLs%02d", k+1), f: float64(c.n), within: 0.01 * float64(9*(c.n-1)), between: 0.01 * float64(8*c.n), inF: c.digits, inSS: c.digits, inWithin: c.digits}
		for _, tenths := range []int{4, 3, 5, 3, 5, 3, 5, 3, 5} {
			write := func(tenths int) string {
				if c.base == "" {
					return "1." + strconv.Itoa(tenths)
				}
				return c.base + "0." + strconv.Itoa(tenths)
			}
			g := []string{write(tenths)}
			for len(g) < c.n {
				g = append(g, write(tenths-1), write(tenths+1))
			}
			s.groups = append(s.groups, g)
		}
		sets = append(sets, s)
	}
	for _, s := range sets {
		rs, list := runFiles(t, oneWayTrial(s.groups))
		if list.HasErrors() {
			t.Fatalf("%s: %s", s.name, list[0].Message)
		}
		r := rs.Responses[0]
		for _, c := range []struct {
			what              string
			got, want, digits float64
		}{
			{"F", float64(r.Tests[0].F), s.f, s.inF},
			{"SS between", float64(r.Anova[0].SS), s.between, s.inSS},
			{"SS within", float64(r.Anova[1].SS), s.within, s.inWithin},
		} {
			if d := digits(c.got, c.want); d < c.digits {
				t.Errorf("%s: %s %.16g, want %.16g: %.1f digits of %.1f", s.name, c.what, c.got, c.want, d, c.digits)
			} else {
				t.Logf("%s: %s %.1f digits", s.name, c.what, d)
			}
		}
	}
}
