package mixed

import (
	"encoding/binary"
	"slices"

	"penwright/protocol/factor"
)

// blockLimits say which random terms may be kept in the blocks of D.
type blockLimits struct {
	rows int // of a block
}

var usualBlocks = blockLimits{rows: 600}

// space is a model made ready: what does not depend on the parameters.
type space struct {
	model *Model
	x     *columns
	n, p  int // rows, kept columns
	q     int // classes of outer random terms

	random []factor.Factor // compacted
	inner  []int           // indices of random terms within the blocks of D
	outer  []int           // those held densely
	from   []int           // first dense level of each outer term; one more at the end

	structure structure
	params    int // of the whole: random terms, then the structure's
	held      int // a parameter that keeps its value, plus one; 0: none

	blocks   []block
	patterns []pattern
}

// block is a set of rows that D ties together.
type block struct {
	rows    []int32
	pattern int
	cols    []int32   // columns of B = [X U] that occur, ascending
	b       []float64 // rows × (len(cols)+1), the response last
}

// pattern is what blocks have in common: which rows share classes, times and groups.
type pattern struct {
	n     int
	share [][]int32 // for each inner term, the class of each row, from 0
	time  []int32   // or group
}

func newSpace(m *Model, y []float64, limits blockLimits) (*space, error) {
	x, err := newColumns(m)
	if err != nil {
		return nil, err
	}
	s := &space{model: m, x: x, n: len(y), p: len(x.kept)}
	for _, r := range m.Random {
		s.random = append(s.random, r.Factor.Compact())
	}
	s.structure = structure{kind: m.Kind, times: m.Times, groups: max(1, m.Group.N)}
	s.params = len(m.Random) + s.structure.parameters()
	of := s.divide(limits)
	s.from = []int{0}
	for _, k := range s.outer {
		s.from = append(s.from, s.from[len(s.from)-1]+s.random[k].N)
	}
	s.q = s.from[len(s.outer)]
	if s.q > MaxLevels {
		return nil, TooLarge{Columns: s.p, Levels: s.q}
	}
	s.gather(of, y)
	return s, nil
}

// divide chooses the random terms that stay within blocks of rows and gives the blocks:
// from the finest term on, each for which larger blocks cost less than more dense levels.
// The work of an iteration is about 10 Σ rows³ over the blocks, and 3(p + q)³.
func (s *space) divide(limits blockLimits) factor.Factor {
	of := factor.Equality(s.n)
	if s.model.Kind != Independent {
		of = s.model.Subject.Compact()
	}
	order := make([]int, len(s.random))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return s.random[b].N - s.random[a].N })
	cubes := func(f factor.Factor) (most int, sum float64) {
		for _, c := range f.Counts() {
			most = max(most, c)
			sum += float64(c) * float64(c) * float64(c)
		}
		return most, sum
	}
	cube := func(x int) float64 { return float64(x) * float64(x) * float64(x) }
	q := 0
	_, now := cubes(of)
	for _, k := range order {
		joined := factor.Supremum(of, s.random[k])
		most, sum := cubes(joined)
		if most <= limits.rows && 10*(sum-now) <= 3*(cube(s.p+q+s.random[k].N)-cube(s.p+q)) {
			of, now = joined, sum
			s.inner = append(s.inner, k)
		} else {
			q += s.random[k].N
			s.outer = append(s.outer, k)
		}
	}
	slices.Sort(s.inner)
	slices.Sort(s.outer)
	return of
}

// gather makes the blocks, their patterns and their part of B and y.
func (s *space) gather(of factor.Factor, y []float64) {
	of = of.Compact()
	rows := make([][]int32, of.N)
	for i, l := range of.Level {
		rows[l] = append(rows[l], int32(i))
	}
	known := map[string]int{}
	local := make([]int32, s.p+s.q) // position of a column in the block, plus one
	for _, r := range rows {
		pat := pattern{n: len(r)}
		var key []byte
		for _, k := range s.inner {
			number := map[int32]int32{}
			share := make([]int32, len(r))
			for i, row := range r {
				l := s.random[k].Level[row]
				if _, ok := number[l]; !ok {
					number[l] = int32(len(number))
				}
				share[i] = number[l]
				key = binary.AppendUvarint(key, uint64(share[i]))
			}
			pat.share = append(pat.share, share)
		}
		pat.time = make([]int32, len(r))
		for i, row := range r {
			switch {
			case s.model.Kind != Independent:
				pat.time[i] = s.model.Time[row]
			case s.model.Group.N > 0:
				pat.time[i] = s.model.Group.Level[row]
			}
			key = binary.AppendUvarint(key, uint64(pat.time[i]))
		}
		// A structure ties rows of one subject only; with larger blocks the subject of a
		// row belongs to the pattern.
		subject := make([]int32, len(r))
		if s.model.Kind != Independent {
			number := map[int32]int32{}
			for i, row := range r {
				l := s.model.Subject.Level[row]
				if _, ok := number[l]; !ok {
					number[l] = int32(len(number))
				}
				subject[i] = number[l]
				key = binary.AppendUvarint(key, uint64(subject[i]))
			}
		}
		pat.share = append(pat.share, subject)
		k, ok := known[string(key)]
		if !ok {
			k = len(s.patterns)
			known[string(key)] = k
			s.patterns = append(s.patterns, pat)
		}
		b := block{rows: r, pattern: k}
		for _, row := range r {
			for u := s.x.start[row]; u < s.x.start[row+1]; u++ {
				if j := s.x.at[s.x.col[u]]; j >= 0 && local[j] == 0 {
					local[j] = 1
					b.cols = append(b.cols, int32(j))
				}
			}
			for o, t := range s.outer {
				j := int32(s.p+s.from[o]) + s.random[t].Level[row]
				if local[j] == 0 {
					local[j] = 1
					b.cols = append(b.cols, j)
				}
			}
		}
		slices.Sort(b.cols)
		for i, j := range b.cols {
			local[j] = int32(i + 1)
		}
		width := len(b.cols) + 1
		b.b = make([]float64, len(r)*width)
		for i, row := range r {
			for u := s.x.start[row]; u < s.x.start[row+1]; u++ {
				if j := s.x.at[s.x.col[u]]; j >= 0 {
					b.b[i*width+int(local[j])-1] += s.x.val[u]
				}
			}
			for o, t := range s.outer {
				j := int32(s.p+s.from[o]) + s.random[t].Level[row]
				b.b[i*width+int(local[j])-1] = 1
			}
			b.b[i*width+width-1] = y[row]
		}
		for _, j := range b.cols {
			local[j] = 0
		}
		s.blocks = append(s.blocks, b)
	}
}

// ties tells whether rows a and b of a pattern belong to one subject.
func (p *pattern) ties(a, b int) bool {
	subject := p.share[len(p.share)-1]
	return subject[a] == subject[b]
}

// innerParams lists the parameters of D: inner random terms, then the structure's.
func (s *space) innerParams() []int {
	out := append([]int(nil), s.inner...)
	for i := len(s.random); i < s.params; i++ {
		out = append(out, i)
	}
	return out
}

// dee is D of a pattern at parameters th.
func (s *space) dee(p *pattern, th []float64) []float64 {
	d := make([]float64, p.n*p.n)
	rest := th[len(s.random):]
	for a := range p.n {
		for b := range a + 1 {
			v := 0.0
			for i, k := range s.inner {
				if p.share[i][a] == p.share[i][b] {
					v += th[k]
				}
			}
			if a == b || s.structure.kind != Independent && p.ties(a, b) {
				v += s.structure.covariance(rest, int(p.time[a]), int(p.time[b]))
			}
			d[a*p.n+b], d[b*p.n+a] = v, v
		}
	}
	return d
}

// deeBy is the derivative of D of a pattern by parameter i, of deeBy2 by i and j.
func (s *space) deeBy(p *pattern, th []float64, i int) []float64 {
	return s.fill(p, i, func(rest []float64, a, b int) float64 {
		return s.structure.derivative(rest, i-len(s.random), a, b)
	}, th)
}

func (s *space) deeBy2(p *pattern, th []float64, i, j int) []float64 {
	return s.fill(p, len(s.random), func(rest []float64, a, b int) float64 {
		return s.structure.second(rest, i-len(s.random), j-len(s.random), a, b)
	}, th)
}

func (s *space) fill(p *pattern, i int, of func(rest []float64, a, b int) float64, th []float64) []float64 {
	d := make([]float64, p.n*p.n)
	if i < len(s.random) {
		share := p.share[slices.Index(s.inner, i)]
		for a := range p.n {
			for b := range p.n {
				d[a*p.n+b] = indicator(share[a] == share[b])
			}
		}
		return d
	}
	rest := th[len(s.random):]
	for a := range p.n {
		for b := range a + 1 {
			if a == b || s.structure.kind != Independent && p.ties(a, b) {
				v := of(rest, int(p.time[a]), int(p.time[b]))
				d[a*p.n+b], d[b*p.n+a] = v, v
			}
		}
	}
	return d
}
