package api

import (
	"fmt"
	"mime/multipart"
	"path"
	"strings"
	"unicode"
	"unicode/utf8"
)

// nameBytes is the longest name an upload keeps; file systems stop at 255 bytes, and " (2)" has to fit.
const nameBytes = 200

// cleanName makes a client's file name safe for a folder: the last element only (of either kind of slash),
// valid UTF-8, no control or invisible characters, not hidden, not too long. "" if nothing is left.
func cleanName(name string) string {
	name = strings.ToValidUTF8(name, "_")
	name = name[strings.LastIndexAny(name, `/\`)+1:]
	name = strings.Map(func(r rune) rune {
		if unicode.IsPrint(r) || r == '\u200c' || r == '\u200d' { // the two joiners carry meaning in some scripts
			return r
		}
		if unicode.IsSpace(r) {
			return ' '
		}
		return -1
	}, name)
	name = strings.TrimLeft(name, ". ")
	name = strings.TrimRight(name, ". ")
	ext := path.Ext(name)
	if len(ext) > 16 {
		ext = ""
	}
	return strings.TrimRight(cut(strings.TrimSuffix(name, ext), nameBytes-len(ext)), " ") + ext
}

// cut shortens s to at most n bytes without splitting a character.
func cut(s string, n int) string {
	if len(s) <= n {
		return s
	}
	for n > 0 && !utf8.RuneStart(s[n]) {
		n--
	}
	return s[:n]
}

// numbered is the nth choice of a name: "take.wav", "take (2).wav", …
func numbered(name string, n int) string {
	if n < 2 {
		return name
	}
	ext := path.Ext(name)
	return fmt.Sprintf("%s (%d)%s", strings.TrimSuffix(name, ext), n, ext)
}

// shownName is what a refusal calls a part of a form.
func shownName(part *multipart.Part) string {
	if name := cleanName(part.FileName()); name != "" {
		return name
	}
	return cleanName(part.FormName())
}
