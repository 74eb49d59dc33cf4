package dist

// Side says in which direction differences count.
type Side int

// The sides of a comparison: A differs from B, is greater, is less.
const (
	Two Side = iota
	Greater
	Less
)

var sideNames = [...]string{Two: "two", Greater: "greater", Less: "less"}

func (s Side) String() string {
	if s < 0 || int(s) >= len(sideNames) {
		return "unknown side"
	}
	return sideNames[s]
}

// ParseSide returns the side with the given name, and whether there is one.
func ParseSide(name string) (Side, bool) {
	for i, n := range sideNames {
		if n == name {
			return Side(i), true
		}
	}
	return Two, false
}
