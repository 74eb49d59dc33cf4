package allot

// equitable exchanges treatments inside the classes of side until every treatment
// stands in all classes of colour equally often to within one, where every class of one
// meets every class of the other once. For two colours the plots that share a class of
// side are the edges of a graph whose vertices are treatments; going along its edges in
// trails, from vertices of odd degree first, and putting the treatment that is left into
// the first colour, makes the numbers of both differ by at most one. Each such step
// lowers the sum of squared numbers, so that it ends.
//
// Source: D. de Werra, Revue française d'informatique et de recherche opérationnelle 5
// (1971) R-3, 3-8 (from memory), for colourings of this kind.
func equitable(at, side, colour []int32, sides, colours, t int) {
	plots := make([][]int32, colours) // plot of each side, -1 for none
	for c := range plots {
		plots[c] = make([]int32, sides)
		for s := range plots[c] {
			plots[c][s] = -1
		}
	}
	count := make([]int32, colours*t)
	for i, x := range at {
		plots[colour[i]][side[i]] = int32(i)
		count[int(colour[i])*t+int(x)]++
	}
	edges := make([][]int32, t) // sides in which a treatment stands in one of two colours
	for changed := true; changed; {
		changed = false
		for a := range colours {
			for b := range a {
				m, n := count[a*t:a*t+t], count[b*t:b*t+t]
				apart := false
				for x := range m {
					apart = apart || m[x]-n[x] > 1 || n[x]-m[x] > 1
				}
				if !apart {
					continue
				}
				for x := range edges {
					edges[x] = edges[x][:0]
				}
				shared := false
				for s := range sides {
					p, q := plots[a][s], plots[b][s]
					if p >= 0 && q >= 0 && at[p] != at[q] {
						edges[at[p]], edges[at[q]] = append(edges[at[p]], int32(s)), append(edges[at[q]], int32(s))
						shared = true
					}
				}
				if shared && trails(at, plots[a], plots[b], edges, m, n) {
					changed = true
				}
			}
		}
	}
}

// trails goes along all edges and tells whether the sum of squared numbers has fallen.
func trails(at, first, second []int32, edges [][]int32, m, n []int32) bool {
	squares := func() (sum int) {
		for x := range m {
			sum += int(m[x])*int(m[x]) + int(n[x])*int(n[x])
		}
		return sum
	}
	before := squares()
	used := make(map[int32]bool)
	degree := make([]int, len(edges))
	for x := range edges {
		degree[x] = len(edges[x])
	}
	walk := func(x int32) {
		for {
			for len(edges[x]) > 0 && used[edges[x][len(edges[x])-1]] {
				edges[x] = edges[x][:len(edges[x])-1]
			}
			if len(edges[x]) == 0 {
				return
			}
			s := edges[x][len(edges[x])-1]
			used[s] = true
			p, q := first[s], second[s]
			y := at[q]
			if y == x { // x stands in the second colour: it goes to the first
				y = at[p]
				at[p], at[q] = at[q], at[p]
				m[x]++
				n[x]--
				m[y]--
				n[y]++
			}
			degree[x]--
			degree[y]--
			x = y
		}
	}
	for x := range edges {
		if degree[x]%2 == 1 {
			walk(int32(x))
		}
	}
	for x := range edges {
		for degree[x] > 0 {
			walk(int32(x))
		}
	}
	return squares() < before
}
