package profile

import (
	"bytes"
	"fmt"
	"unicode/utf8"

	"github.com/pelletier/go-toml/v2/unstable"
)

// A profile has some 40 keys, of two parts at the most. A text with far more, or far deeper, is none, and reading it
// would take time that grows with their square.
const (
	mostParts = 1000 // lines, parts of keys and values in all
	deepest   = 8    // parts of a key, and tables and lists within each other
)

// refused says why a text is not worth decoding, in time that grows with its length; no words if it is.
func refused(text []byte) Complaint {
	if bytes.IndexByte(text, 0) >= 0 {
		return Complaint{Words: "is not text"}
	}
	if !utf8.Valid(text) {
		at := 0
		for r, size := utf8.DecodeRune(text); r != utf8.RuneError || size != 1; r, size = utf8.DecodeRune(text[at:]) {
			at += size
		}
		return Complaint{Line: lineOf(text, at), Words: "is not text in UTF-8"}
	}
	var p unstable.Parser
	p.Reset(text)
	for s := (size{}); p.NextExpression(); { // what is not TOML ends it: decoding tells more
		if s.add(p.Expression(), 1); s.deep {
			return Complaint{Words: fmt.Sprintf("is nested deeper than %d: no profile is", deepest)}
		}
		if s.parts > mostParts {
			return Complaint{Words: "has many more keys and values than a profile has"}
		}
	}
	return Complaint{}
}

// size is how much there is in a text.
type size struct {
	parts int
	deep  bool
}

// add counts a node, which lies in depth others, with all that is in it; it stops where there is too much.
func (s *size) add(n *unstable.Node, depth int) {
	if s.parts++; s.parts > mostParts || s.deep {
		return
	}
	if s.deep = depth > deepest; s.deep {
		return
	}
	key := 0
	for in := n.Children(); in.Next() && s.parts <= mostParts && !s.deep; {
		if c := in.Node(); c.Kind == unstable.Key {
			s.parts++
			key++
			s.deep = key > deepest
		} else {
			s.add(c, depth+1)
		}
	}
}

// lineOf is the line of a place in a text, from 1.
func lineOf(text []byte, at int) int { return 1 + bytes.Count(text[:at], []byte{'\n'}) }
