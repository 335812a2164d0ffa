package tags

import (
	"strings"
	"unicode/utf8"

	"golang.org/x/text/encoding/charmap"
)

// Most is how many pictures or chapters a recording is taken to have: whoever has more has them from a machine gone mad.
const Most = 2000

// Guess decodes a text whose encoding is nowhere stated, up to its first zero and without the spaces that fill it up:
// UTF-8 if it can be that, else Windows 1252, which has all that ISO 8859-1 has.
func Guess(b []byte) string {
	s, _, _ := strings.Cut(string(b), "\x00")
	if !utf8.ValidString(s) {
		s = Latin([]byte(s))
	}
	return strings.TrimSpace(s)
}

// Latin decodes ISO 8859-1, and what Windows 1252 has in place of its second set of control characters, which is what
// writers mean.
func Latin(b []byte) string {
	s, err := charmap.Windows1252.NewDecoder().Bytes(b)
	if err != nil { // it decodes every byte
		return strings.ToValidUTF8(string(b), "")
	}
	return string(s)
}
