package allot

import (
	"crypto/sha256"
	"math"
	"math/rand/v2"
)

// GeneratorText describes the generator in the record, so that another program can
// repeat a draw.
const GeneratorText = "ChaCha8 (C2SP chacha8rand) keyed with SHA-256 of the seed text; " +
	"a whole number below k: 64-bit outputs v, those at or above 2^64 - (2^64 mod k) rejected, v mod k (none is taken for k = 1); " +
	"permutations by Durstenfeld: for i = n-1 down to 1, exchange i with a whole number below i+1"

// Generator is the source of all chance. Its numbers follow from the seed text alone.
//
// Source: C2SP chacha8rand, c2sp.org/chacha8rand; R. Durstenfeld, Communications of the
// ACM 7 (1964) 420, Algorithm 235.
type Generator struct{ source *rand.ChaCha8 }

// NewGenerator keys a generator with SHA-256 of seed.
func NewGenerator(seed string) *Generator {
	return &Generator{source: rand.NewChaCha8(sha256.Sum256([]byte(seed)))}
}

// Uint64 is the next 64 bits of the stream.
func (g *Generator) Uint64() uint64 { return g.source.Uint64() }

// Below gives each of 0 … k−1 with the same probability. Values v at or above
// 2⁶⁴ − (2⁶⁴ mod k) are rejected, others give v mod k; k = 1 takes nothing from the
// stream. It panics unless k ≥ 1.
func (g *Generator) Below(k int) int {
	switch {
	case k < 1:
		panic("allot: a number below nothing")
	case k == 1:
		return 0
	}
	n := uint64(k)
	spare := (math.MaxUint64%n + 1) % n // 2⁶⁴ mod k
	for {
		if v := g.source.Uint64(); v <= math.MaxUint64-spare {
			return int(v % n)
		}
	}
}

// Shuffle permutes a so that every order has the same probability.
func (g *Generator) Shuffle(a []int32) {
	for i := len(a) - 1; i >= 1; i-- {
		j := g.Below(i + 1)
		a[i], a[j] = a[j], a[i]
	}
}
