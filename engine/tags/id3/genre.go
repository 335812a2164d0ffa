package id3

import (
	"strconv"
	"strings"

	"evenshelf/engine/tags"
)

// genresOf takes a TCON text apart: "(4)(51)Refinement" in 2.3 (2.3.0, 4.2.1), "4" or words in 2.4.
func genresOf(s string) (list []string) {
	for len(list) < maxValues && strings.HasPrefix(s, "(") && !strings.HasPrefix(s, "((") {
		number, rest, closed := strings.Cut(s[1:], ")")
		name := genre(number)
		if !closed || name == "" {
			break
		}
		list, s = append(list, name), rest
	}
	if strings.HasPrefix(s, "((") { // how 2.3 begins a text with a bracket
		s = s[1:]
	}
	if name := genre(s); name != "" {
		s = name
	}
	return append(list, s)
}

// genre returns the genre of a number, or of two more abbreviations that ID3v2 has; "" if it is none.
func genre(number string) string {
	switch number {
	case "RX":
		return "Remix"
	case "CR":
		return "Cover"
	}
	if n, err := strconv.ParseUint(number, 10, 8); err == nil && int(n) < len(tags.Genres) {
		return tags.Genres[n]
	}
	return ""
}
