package allot

// round rounds a table of shares to whole numbers at random so that all its row and
// column sums stay as they are, each share goes to the whole number below or above, and
// the mean over all draws is the share itself. share[i][j] is a whole number of parts, of
// which unit make one; row and column sums are whole multiples of unit.
//
// As long as a share is broken there is a ring of broken shares, two in each of its rows
// and columns. Starting from the first broken share in the order of the rows, the next is
// the first broken other one in its row, then in its column, and so on until a row or
// column is met again. The shares of the ring are raised and lowered in turn, by as much
// as makes one of them whole, in the one or the other direction with probabilities that
// keep the mean.
//
// Source: L. H. Cox, Journal of the American Statistical Association 82 (1987) 520-524
// (from memory).
func round(g *Generator, share [][]int, unit int) {
	broken := func(i, j int) bool { return share[i][j]%unit != 0 }
	for {
		ring := ringOf(share, broken)
		if ring == nil {
			return
		}
		up, down := unit, unit // by how much the even ones can be raised, or lowered
		for k, c := range ring {
			below := share[c[0]][c[1]] % unit
			if k%2 == 1 {
				below = unit - below
			}
			up, down = min(up, unit-below), min(down, below)
		}
		by := up
		if g.Below(up+down) >= down {
			by = -down
		}
		for k, c := range ring {
			if k%2 == 0 {
				share[c[0]][c[1]] += by
			} else {
				share[c[0]][c[1]] -= by
			}
		}
	}
}

// ringOf finds a ring of broken shares, going along a row and along a column in turn.
func ringOf(share [][]int, broken func(i, j int) bool) [][2]int {
	for i := range share {
		for j := range share[i] {
			if !broken(i, j) {
				continue
			}
			path := [][2]int{{i, j}}
			for {
				at := path[len(path)-1]
				next := at
				if len(path)%2 == 1 { // along the row
					for c := range share[at[0]] {
						if c != at[1] && broken(at[0], c) {
							next[1] = c
							break
						}
					}
				} else {
					for r := range share {
						if r != at[0] && broken(r, at[1]) {
							next[0] = r
							break
						}
					}
				}
				if next == at {
					panic("allot: shares do not add up to whole numbers")
				}
				// Cells of even places begin a row, those of odd places a column; the ring
				// closes where the line to be taken next was taken before.
				odd := len(path) % 2
				for k := 1 - odd; k < len(path); k += 2 {
					if path[k][odd] == next[odd] {
						return append(path[k:len(path):len(path)], next)
					}
				}
				path = append(path, next)
			}
		}
	}
	return nil
}
