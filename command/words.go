package command

import (
	"fmt"
	"math"
	"strings"
	"unicode"
	"unicode/utf8"

	"evenshelf/engine/audio"
)

// figure writes a number to one decimal with a true minus sign, right-aligned; an undefined one is a dash.
func figure(v float64, width int) string {
	s := "–"
	if !math.IsNaN(v) && !math.IsInf(v, 0) {
		s = audio.Number(v, 1)
	}
	return strings.Repeat(" ", max(0, width-utf8.RuneCountInString(s))) + s
}

// duration writes seconds as m:ss, or h:mm:ss from an hour on.
func duration(seconds float64) string {
	s := int(math.Round(seconds))
	if s >= 3600 {
		return fmt.Sprintf("%d:%02d:%02d", s/3600, s/60%60, s%60)
	}
	return fmt.Sprintf("%d:%02d", s/60, s%60)
}

// printable replaces control characters and those that turn the direction of writing, so that a hostile file
// name can neither drive the terminal nor look like another.
func printable(s string) string {
	return strings.Map(func(r rune) rune {
		if unicode.IsControl(r) || unicode.Is(unicode.Bidi_Control, r) {
			return '·'
		}
		return r
	}, s)
}

// oneLine is an error for a terminal. Errors that were joined are lines of their own until then.
func oneLine(err error) string {
	return printable(strings.ReplaceAll(err.Error(), "\n", "; "))
}
