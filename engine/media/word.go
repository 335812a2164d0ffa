package media

import "fmt"

// WithWord returns the spec with another word length, 16, 24 or 32 bits, where it stores whole numbers or
// floating point; 0 keeps the spec's own. Formats that have no room for a length get their longest, lossy ones
// have none.
func (s Spec) WithWord(bits int) Spec {
	if bits == 0 || s.BitDepth == 0 {
		return s
	}
	s.BitDepth, s.Float = bits, false
	switch {
	case s.Container == "wav":
		s.Codec = fmt.Sprintf("pcm_s%dle", bits)
	case s.Container == "aiff":
		s.Codec = fmt.Sprintf("pcm_s%dbe", bits)
	default: // FLAC and ALAC
		s.BitDepth = min(bits, 24)
	}
	return s
}
