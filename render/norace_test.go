//go:build !race

package render

// underRace is true where time and memory are those of the race detector.
const underRace = false
