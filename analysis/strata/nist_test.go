package strata

import (
	"math"
	"testing"

	"penwright/protocol/factor"
)

// digits is the number of correct digits.
func digits(got, want float64) float64 {
	if got == want {
		return 17
	}
	return -math.Log10(math.Abs(got-want) / math.Abs(want))
}

func oneWay(t *testing.T, groups [][]float64) *Analysis {
	t.Helper()
	var y []float64
	var n []int
	for _, g := range groups {
		y = append(y, g...)
		n = append(n, len(g))
	}
	return analyse(t, Design{Units: []factor.Factor{factor.Equality(len(y))}, Factors: []factor.Factor{runs(n...)}, Terms: [][]int{{0}}}, y)
}

// Data and certified values: NIST Statistical Reference Datasets, one-way analysis of
// variance (public domain).
func TestReferenceDatasets(t *testing.T) {
	silicon := [][]float64{
		{196.3052, 196.1240, 196.1890, 196.2569, 196.3403}, {196.3042, 196.3825, 196.1669, 196.3257, 196.0422},
		{196.1303, 196.2005, 196.2889, 196.0343, 196.1811}, {196.2795, 196.1748, 196.1494, 196.1485, 195.9885},
		{196.2119, 196.1051, 196.1850, 196.0052, 196.2090},
	}
	a := oneWay(t, silicon)
	for _, c := range []struct{ got, want, digits float64 }{
		{a.f(0), 1.18046237440255, 12},
		{a.Terms[0].SS, 5.11462616e-2, 9},
		{a.Strata[0].ErrorSS, 2.16636560e-1, 9},
		{math.Sqrt(a.Strata[0].ErrorMS()), .104076068334656, 12},
		{a.Terms[0].SS / a.Strata[0].SS, .190999039051129, 12},
	} {
		if d := digits(c.got, c.want); d < c.digits {
			t.Errorf("SiRstv: %.15g, want %.15g: %.1f digits", c.got, c.want, d)
		}
	}

	weights := [2][]float64{
		{1568, 1465, 1572, 1785, 1446, 1903, 1526, 1494, 1616, 1587, 1519, 1486, 1419, 1569, 1508, 1672, 1385, 1518, 1662, 1424, 1360, 1333, 1610, 1477},
		{1079, 1344, 1513, 1197, 1604, 1385, 1642, 1365, 1151, 1082, 1517, 1448, 1198, 1482, 1334, 1609, 1101, 1512, 1469, 1360, 1254, 1261, 1450, 1368},
	}
	for _, g := range weights {
		for i := range g {
			g[i] = (1078680000 + g[i]) / 1e7 // 107.868 0000 + x, rounded once as reading it would
		}
	}
	a = oneWay(t, weights[:])
	if d := digits(a.f(0), 15.9467335677930); d < 9.5 {
		t.Errorf("AtmWtAg: F %.15g: %.1f digits", a.f(0), d)
	}
	if d := digits(a.Terms[0].SS, 3.63834187500e-9); d < 9 {
		t.Errorf("AtmWtAg: SS %.15g: %.1f digits", a.Terms[0].SS, d)
	}
}

// Simulated sets by their rule: nine treatments, each its centre, then pairs a tenth below
// and above; F is the number of values of a treatment exactly.
func TestSimulatedReferenceDatasets(t *testing.T) {
	for _, c := range []struct {
		name   string
		base   float64
		n      int
		digits float64
	}{
		{"SmLs01", 1, 21, 13}, {"SmLs02", 1, 201, 13}, {"SmLs03", 1, 2001, 13},
		{"SmLs04", 1e6, 21, 9.5}, {"SmLs05", 1e6, 201, 9.5}, {"SmLs06", 1e6, 2001, 9.5},
		{"SmLs07", 1e12, 21, 3.5}, {"SmLs08", 1e12, 201, 3.5}, {"SmLs09", 1e12, 2001, 3.5},
	} {
		var groups [][]float64
		for _, tenths := range []float64{4, 3, 5, 3, 5, 3, 5, 3, 5} {
			at := c.base*10 + tenths
			g := []float64{at / 10}
			for len(g) < c.n {
				g = append(g, (at-1)/10, (at+1)/10)
			}
			groups = append(groups, g)
		}
		a := oneWay(t, groups)
		if d := digits(a.f(0), float64(c.n)); d < c.digits {
			t.Errorf("%s: F %.17g: %.1f digits, want %.1f", c.name, a.f(0), d, c.digits)
		}
		t.Logf("%s: %.1f digits", c.name, digits(a.f(0), float64(c.n)))
	}
}
