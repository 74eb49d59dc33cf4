package analysis

import (
	"fmt"
	"math"
	"math/rand/v2"
	"runtime"
	"strconv"
	"strings"
	"testing"
	"testing/fstest"
	"time"
)

// animals makes a trial of many animals: diets in blocks of pens, rows animals in all.
// Where each says so, animals are a unit of their own and pens are not averaged first.
func animals(blocks, diets, each int, unit bool) fstest.MapFS {
	pens := blocks * diets
	protocol := fmt.Sprintf(`protocol = 1
[trial]
code = "H"
title = "Many animals"
objective = "How long it takes."
[randomization]
method = "made up"
[[factor]]
name = "diet"
levels = [%s]
[[unit]]
name = "block"
count = %d
[[unit]]
name = "pen"
within = "block"
count = %d
numbered = "through"
receives = ["diet"]
`, numbers(diets), blocks, diets)
	if unit {
		protocol += fmt.Sprintf("[[unit]]\nname = \"pig\"\nwithin = \"pen\"\ncount = %d\n", each)
	}
	protocol += "[analysis]\ncomparison = \"tukey\"\n[[response]]\nname = \"gain\"\nkind = \"continuous\"\n"
	if !unit {
		protocol += "recorded_on = \"pen\"\naggregate = \"mean\"\n"
	}
	protocol += "[data]\nfile = \"data.csv\"\n"
	r := rand.New(rand.NewPCG(1, 2))
	data := make([]byte, 0, pens*each*32)
	data = append(data, "block,pen,pig,diet,gain\n"...)
	for b := range blocks {
		order := r.Perm(diets)
		for k, d := range order {
			at := 700 + 5*float64(d) + 20*r.NormFloat64()
			for a := range each {
				data = strconv.AppendInt(data, int64(b+1), 10)
				data = append(data, ',')
				data = strconv.AppendInt(data, int64(b*diets+k+1), 10)
				data = append(data, ',')
				data = strconv.AppendInt(data, int64(a+1), 10)
				data = append(data, ',')
				data = strconv.AppendInt(data, int64(d+1), 10)
				data = append(data, ',')
				data = strconv.AppendFloat(data, math.Round(10*(at+60*r.NormFloat64()))/10, 'f', 1, 64)
				data = append(data, '\n')
			}
		}
	}
	return fstest.MapFS{"protocol.toml": &fstest.MapFile{Data: []byte(protocol)}, "data.csv": &fstest.MapFile{Data: data}}
}

func numbers(n int) string {
	out := ""
	for i := range n {
		if i > 0 {
			out += ", "
		}
		out += strconv.Itoa(i + 1)
	}
	return out
}

// BenchmarkMillionAnimals reads, aggregates and analyses a million rows in ten thousand
// pens; 5 s and 1 GiB are the limits.
func BenchmarkMillionAnimals(b *testing.B) {
	for _, c := range []struct {
		name string
		unit bool
	}{{"averaged", false}, {"unit", true}} {
		files := animals(1000, 10, 100, c.unit)
		b.Run(c.name, func(b *testing.B) {
			peak := watch()
			for b.Loop() {
				rs, list := runFiles(b, files)
				if list.HasErrors() || rs.Responses[0].Model == nil {
					b.Fatal("not analysed")
				}
			}
			b.ReportMetric(peak()/(1<<20), "MiB")
		})
	}
}

// watch samples the heap and gives its peak.
func watch() func() float64 {
	done, out := make(chan struct{}), make(chan float64)
	go func() {
		var peak float64
		tick := time.NewTicker(5 * time.Millisecond)
		defer tick.Stop()
		for {
			var m runtime.MemStats
			runtime.ReadMemStats(&m)
			peak = max(peak, float64(m.HeapInuse))
			select {
			case <-done:
				out <- peak
				return
			case <-tick.C:
			}
		}
	}()
	return func() float64 {
		close(done)
		return <-out
	}
}

// A hundred thousand animals: averages of pens and animals as units give one test.
func TestManyAnimals(t *testing.T) {
	averaged, list := runFiles(t, animals(250, 8, 50, false))
	if list.HasErrors() {
		t.Fatal(list[0].Message)
	}
	units, list := runFiles(t, animals(250, 8, 50, true))
	if list.HasErrors() {
		t.Fatal(list[0].Message)
	}
	a, b := averaged.Responses[0], units.Responses[0]
	if a.N != 2000 || b.N != 100_000 {
		t.Errorf("%d pens, %d animals", a.N, b.N)
	}
	if f, g := float64(a.Tests[0].F), float64(b.Tests[0].F); !(f > 1) || math.Abs(f-g) > 1e-9*f || a.Tests[0].ErrorDF != b.Tests[0].ErrorDF || a.Tests[0].ErrorDF != 249*7 {
		t.Errorf("F %v on %v, %v on %v", f, a.Tests[0].ErrorDF, g, b.Tests[0].ErrorDF)
	}
	if se, sf := float64(a.Means[0].SE), float64(b.Means[0].SE); math.Abs(se-sf) > 1e-9*se {
		t.Errorf("standard errors %v and %v", se, sf)
	}
}

// Hundreds of treatments must not take seconds, nor list a hundred thousand differences, nor
// when units are lost.
func TestManyTreatments(t *testing.T) {
	for _, c := range []struct {
		name           string
		blocks, diets  int
		lost           bool
		method, design string
	}{
		{"one way", 1, 600, false, "strata", "completely randomized"},
		{"blocks", 3, 600, false, "strata", "randomized complete block"},
		{"units lost", 3, 300, true, "least squares", "randomized complete block"},
	} {
		t.Run(c.name, func(t *testing.T) {
			files := animals(c.blocks, c.diets, 1, false)
			if c.blocks == 1 { // the same pens twice over, without their block
				files = oneWay(c.diets, 2)
			}
			if c.lost {
				data := string(files["data.csv"].Data)
				lines := strings.Split(data, "\n")
				for _, k := range []int{1, 17, 300} {
					lines[k] = lines[k][:strings.LastIndexByte(lines[k], ',')+1]
				}
				files["data.csv"].Data = []byte(strings.Join(lines, "\n"))
			}
			start := time.Now()
			rs, list := runFiles(t, files)
			if took := time.Since(start); took > 30*time.Second {
				t.Errorf("took %v", took)
			}
			if list.HasErrors() {
				t.Fatal(list[0].Message)
			}
			r := rs.Responses[0]
			if r.Model.Method != c.method || rs.Design.Name != c.design {
				t.Errorf("%s, %s", r.Model.Method, rs.Design.Name)
			}
			if len(r.Means) != c.diets || len(r.Comparisons) != 0 || r.SED[0].LSD.Known() == c.lost {
				t.Errorf("%d means, %d comparisons, SED %+v", len(r.Means), len(r.Comparisons), r.SED)
			}
		})
	}
}

// BenchmarkManyTreatments has two thousand of them, four thousand pens.
func BenchmarkManyTreatments(b *testing.B) {
	files := oneWay(2000, 2)
	for b.Loop() {
		rs, list := runFiles(b, files)
		if list.HasErrors() || len(rs.Responses[0].Means) != 2000 {
			b.Fatal("not analysed")
		}
	}
}

// oneWay makes a completely randomized trial.
func oneWay(diets, each int) fstest.MapFS {
	files := animals(1, diets, 1, false)
	p := string(files["protocol.toml"].Data)
	from, to := strings.Index(p, "[[unit]]"), strings.Index(p, "[analysis]")
	p = p[:from] + fmt.Sprintf("[[unit]]\nname = \"pen\"\ncount = %d\nreceives = [\"diet\"]\n", diets*each) + p[to:]
	r := rand.New(rand.NewPCG(5, 6))
	var b strings.Builder
	b.WriteString("pen,diet,gain\n")
	for i := range diets * each {
		fmt.Fprintf(&b, "%d,%d,%.1f\n", i+1, i%diets+1, 500+100*r.NormFloat64())
	}
	return fstest.MapFS{"protocol.toml": &fstest.MapFile{Data: []byte(p)}, "data.csv": &fstest.MapFile{Data: []byte(b.String())}}
}
