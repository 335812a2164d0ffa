package id3

import (
	"bytes"
	"strings"
	"unicode/utf16"
	"unicode/utf8"

	"evenshelf/engine/tags"
)

// text decodes a text up to its end mark.
func text(encoding byte, b []byte) string {
	s, _ := cut(encoding, b)
	return s
}

// cut decodes a text up to its end mark, in the encodings of ID3v2.4, 4: ISO 8859-1, UTF-16 with a byte order mark or
// big-endian, UTF-8. rest is what follows the mark.
func cut(encoding byte, b []byte) (s string, rest []byte) {
	if encoding != 1 && encoding != 2 {
		b, rest, _ = bytes.Cut(b, []byte{0})
		if encoding == 3 && utf8.Valid(b) {
			return string(b), rest
		}
		return tags.Latin(b), rest
	}
	little := encoding == 1
	var units []uint16
	for ; len(b) >= 2; b = b[2:] {
		u := uint16(b[0])<<8 | uint16(b[1])
		if little {
			u = u>>8 | u<<8
		}
		switch {
		case u == 0:
			return string(utf16.Decode(units)), b[2:]
		case u == 0xFFFE && len(units) == 0: // the mark, read in the wrong order
			little = !little
		case u != 0xFEFF || len(units) > 0:
			units = append(units, u)
		}
	}
	return string(utf16.Decode(units)), nil
}

// list decodes what a frame says that has a text, or several with end marks between them, which is what 2.4 has lists
// for and other versions are found with.
func list(encoding byte, b []byte) (values []string) {
	for len(b) > 0 && len(values) < maxValues {
		var s string
		s, b = cut(encoding, b)
		values = append(values, s)
	}
	return values
}

// slashed takes apart what 2.3 has for a list of people: names with slashes between them (2.3.0, 4.2.1). A slash beside
// one or two letters stands in a name.
func slashed(values []string) (apart []string) {
	const initials = 2
	for _, v := range values {
		parts := strings.Split(v, "/")
		for i, p := range parts {
			if parts[i] = strings.TrimSpace(p); utf8.RuneCountInString(parts[i]) <= initials {
				parts = []string{v}
				break
			}
		}
		apart = append(apart, parts...)
	}
	return apart
}
