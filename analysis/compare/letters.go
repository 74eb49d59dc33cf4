package compare

import (
	"math/bits"
	"slices"
	"strconv"
	"strings"
)

// maxColumns bounds the work of insertion; beyond it letters are still right, but
// more than need be.
const maxColumns = 1024

// Letters returns for each of n means the letters that mark it: two means share a letter
// exactly when differ is false for them.
//
// order lists all indices 0…n−1 in the order in which letters are dealt out, usually
// the largest mean first, which so gets a. After z come a1…z1, a2 and so on: a letter with
// the digits behind it is one mark.
//
// Columns start as one of all means; each different pair splits the columns that hold both
// into two, and a column within another is absorbed (H.-P. Piepho, J. Comput. Graph.
// Statist. 13 (2004) 456). This is right for any pattern, also where standard errors
// differ and the means that do not differ form no unbroken runs.
func Letters(n int, differ func(i, j int) bool, order []int) []string {
	if len(order) != n {
		panic("compare: order does not list the means")
	}
	// Columns are sets of positions in order.
	different := make([]set, n)
	for a := range n {
		different[a] = newSet(n)
	}
	for a := range n {
		for b := a + 1; b < n; b++ {
			if differ(order[a], order[b]) {
				different[a].add(b)
				different[b].add(a)
			}
		}
	}
	columns := insertAbsorb(n, different)
	if columns == nil {
		columns = cover(n, different)
	}
	slices.SortFunc(columns, func(a, b set) int { return slices.Compare(a.members(), b.members()) })
	text := make([]strings.Builder, n)
	for c, column := range columns {
		for _, position := range column.members() {
			b := &text[order[position]]
			b.WriteByte(byte('a' + c%26))
			if c >= 26 {
				b.WriteString(strconv.Itoa(c / 26))
			}
		}
	}
	out := make([]string, n)
	for i := range text {
		out[i] = text[i].String()
	}
	return out
}

// insertAbsorb returns the columns, or nil if they become too many.
func insertAbsorb(n int, different []set) []set {
	if n == 0 {
		return nil
	}
	all := newSet(n)
	for a := range n {
		all.add(a)
	}
	columns := []set{all}
	for a := range n {
		for _, b := range different[a].members() {
			if b < a {
				continue
			}
			var kept, split []set
			for _, c := range columns {
				if !c.has(a) || !c.has(b) {
					kept = append(kept, c)
					continue
				}
				without := slices.Clone(c)
				without.remove(b)
				c.remove(a)
				split = append(split, without, c)
			}
			// Columns that were not split are not within each other, nor within the smaller new ones.
			for i, c := range split {
				absorbed := slices.ContainsFunc(kept, c.within)
				for j, other := range split {
					absorbed = absorbed || i != j && c.within(other) && (j < i || !other.within(c))
				}
				if !absorbed {
					kept = append(kept, c)
				}
			}
			if columns = kept; len(columns) > maxColumns {
				return nil
			}
		}
	}
	return columns
}

// cover returns columns in which every two means that do not differ stand together in at
// least one, by growing a column around each pair not yet covered.
func cover(n int, different []set) []set {
	covered := make([]set, n)
	for a := range n {
		covered[a] = newSet(n)
	}
	var columns []set
	for a := range n {
		for b := a; b < n; b++ {
			if covered[a].has(b) || different[a].has(b) {
				continue
			}
			column := newSet(n)
			column.add(a)
			column.add(b)
			for c := range n {
				if !column.has(c) && !column.meets(different[c]) {
					column.add(c)
				}
			}
			members := column.members()
			for _, x := range members {
				for _, y := range members {
					covered[x].add(y)
				}
			}
			columns = append(columns, column)
		}
	}
	return columns
}

// set is a set of small integers.
type set []uint64

func newSet(n int) set { return make(set, (n+63)/64) }

func (s set) add(i int)      { s[i/64] |= 1 << (i % 64) }
func (s set) remove(i int)   { s[i/64] &^= 1 << (i % 64) }
func (s set) has(i int) bool { return s[i/64]&(1<<(i%64)) != 0 }

func (s set) within(other set) bool {
	for i, w := range s {
		if w&^other[i] != 0 {
			return false
		}
	}
	return true
}

func (s set) meets(other set) bool {
	for i, w := range s {
		if w&other[i] != 0 {
			return true
		}
	}
	return false
}

func (s set) members() []int {
	var m []int
	for i, w := range s {
		for ; w != 0; w &= w - 1 {
			m = append(m, i*64+bits.TrailingZeros64(w))
		}
	}
	return m
}
