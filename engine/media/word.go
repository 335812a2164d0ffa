package media

import "fmt"

// wordOf is the word length a container's whole numbers have if so many bits are asked for: FLAC and ALAC have
// room for 24.
func wordOf(container string, bits int) int {
	if container == "wav" || container == "aiff" {
		return bits
	}
	return min(bits, 24)
}

// WithWord returns the spec with another word length, 16, 24 or 32 bits, where it stores whole numbers or
// floating point; 0 keeps the spec's own. Formats that have no room for a length get their longest, lossy ones
// have none.
func (s Spec) WithWord(bits int) Spec {
	if bits == 0 || s.BitDepth == 0 {
		return s
	}
	s.BitDepth, s.Float = wordOf(s.Container, bits), false
	switch s.Container {
	case "wav":
		s.Codec = fmt.Sprintf("pcm_s%dle", bits)
	case "aiff":
		s.Codec = fmt.Sprintf("pcm_s%dbe", bits)
	}
	return s
}

// HasWord reports whether a recording has the word length that WithWord would give it. Lossy ones always do.
func (i Info) HasWord(bits int) bool {
	return bits == 0 || i.BitDepth == 0 || !i.Float && i.BitDepth == wordOf(i.Container, bits)
}
