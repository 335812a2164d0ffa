//go:build !race

package level

import (
	"bytes"
	"fmt"
	"maps"
	"math/rand/v2"
	"slices"
)

// damage is one way to spoil a file.
type damage struct {
	name  string
	spoil func(b []byte, r *rand.Rand) []byte // b is its own copy
}

// damages are what happens to files: copying that broke off, bad sectors, flipped bits, wrong sizes, foreign bytes.
var damages = []damage{
	{"cut in the header", func(b []byte, _ *rand.Rand) []byte { return b[:min(43, len(b))] }},
	{"cut in the middle", func(b []byte, _ *rand.Rand) []byte { return b[:len(b)/2] }},
	{"head gone", func(b []byte, _ *rand.Rand) []byte { return b[100:] }},
	{"flips in the header", func(b []byte, r *rand.Rand) []byte { return flip(b, r, 4, 160) }},
	{"flips everywhere", func(b []byte, r *rand.Rand) []byte { return flip(b, r, 30, len(b)) }},
	{"huge sizes", func(b []byte, r *rand.Rand) []byte { return lie(b, r, 0xFF) }},
	{"sizes of none", func(b []byte, r *rand.Rand) []byte { return lie(b, r, 0) }},
	{"a hole of zeros", func(b []byte, _ *rand.Rand) []byte {
		clear(b[len(b)/3 : len(b)/2])
		return b
	}},
	{"a hole of noise", func(b []byte, r *rand.Rand) []byte {
		for i := range b[len(b)/3 : len(b)/2] {
			b[len(b)/3+i] = byte(r.Uint32())
		}
		return b
	}},
	{"junk behind", func(b []byte, _ *rand.Rand) []byte { return append(b, bytes.Repeat([]byte("junk"), 5000)...) }},
	{"twice", func(b []byte, _ *rand.Rand) []byte { return append(b, b...) }},
}

// flip turns over n bits among the first so many bytes.
func flip(b []byte, r *rand.Rand, n, first int) []byte {
	for range n {
		b[r.IntN(min(first, len(b)))] ^= 1 << r.IntN(8)
	}
	return b
}

// lie overwrites four bytes at three places in the first 400, where sizes and counts are.
func lie(b []byte, r *rand.Rand, with byte) []byte {
	for range 3 {
		at := 4 + 2*r.IntN(min(400, len(b)-8)/2)
		for i := range 4 {
			b[at+i] = with
		}
	}
	return b
}

// damaged spoils every file in every way. The same names give the same bytes.
func damaged(files map[string][]byte) map[string][]byte {
	out := map[string][]byte{}
	for n, name := range slices.Sorted(maps.Keys(files)) {
		for m, d := range damages {
			r := rand.New(rand.NewPCG(uint64(n), uint64(m)))
			out[fmt.Sprintf("%s, %s", d.name, name)] = d.spoil(bytes.Clone(files[name]), r)
		}
	}
	return out
}
