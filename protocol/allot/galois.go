package allot

// galois is the finite field of q elements, numbered from 0; 0 and 1 are its zero and
// one, and for q = pᵐ element Σ aᵢ pⁱ is the polynomial Σ aᵢ xⁱ over the integers modulo
// p, reduced by the first irreducible monic polynomial of degree m in the order of
// those numbers.
type galois struct {
	q, p    int
	sum     []uint16
	product []uint16
}

// largestField bounds the tables of a field.
const largestField = 256

// newField makes the field of q elements, nil where q is no power of a prime or larger
// than largestField.
func newField(q int) *galois {
	if q < 2 || q > largestField {
		return nil
	}
	p := 2
	for q%p != 0 {
		p++
	}
	m := 0
	for n := q; n > 1; n /= p {
		if n%p != 0 {
			return nil
		}
		m++
	}
	f := &galois{q: q, p: p, sum: make([]uint16, q*q), product: make([]uint16, q*q)}
	digits := func(n, k int) []int {
		d := make([]int, k)
		for i := range d {
			d[i] = n % p
			n /= p
		}
		return d
	}
	number := func(d []int) int {
		n := 0
		for i := len(d) - 1; i >= 0; i-- {
			n = n*p + d[i]
		}
		return n
	}
	multiply := func(a, b []int) []int {
		out := make([]int, len(a)+len(b)-1)
		for i, x := range a {
			for j, y := range b {
				out[i+j] = (out[i+j] + x*y) % p
			}
		}
		return out
	}
	// A monic polynomial of degree m is irreducible when it is no product of two of
	// lower degree.
	reducible := make([]bool, q)
	for d := 1; 2*d <= m; d++ {
		for a := range power(p, d) {
			for b := range power(p, m-d) {
				c := multiply(append(digits(a, d), 1), append(digits(b, m-d), 1))
				reducible[number(c[:m])] = true
			}
		}
	}
	rest := 0
	for m > 1 && reducible[rest] {
		rest++
	}
	modulus := digits(rest, m)
	for a := range q {
		for b := range q {
			x, y := digits(a, m), digits(b, m)
			c := multiply(x, y)
			for i := len(c) - 1; i >= m; i-- {
				for j, z := range modulus {
					c[i-m+j] = (c[i-m+j] + (p-z)*c[i]) % p
				}
			}
			f.product[a*q+b] = uint16(number(c[:m]))
			for i := range x {
				x[i] = (x[i] + y[i]) % p
			}
			f.sum[a*q+b] = uint16(number(x))
		}
	}
	return f
}

func power(p, m int) int {
	n := 1
	for range m {
		n *= p
	}
	return n
}

func (f *galois) add(a, b int) int   { return int(f.sum[a*f.q+b]) }
func (f *galois) times(a, b int) int { return int(f.product[a*f.q+b]) }
