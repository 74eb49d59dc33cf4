//go:build race

package compose

// underRace is true where time and memory are those of the race detector.
const underRace = true
