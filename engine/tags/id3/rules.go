package id3

import (
	"bytes"
	"slices"
	"strings"

	"evenshelf/engine/tags"
)

// rule says what is taken out of tags.
type rule struct {
	frames  []string               // ID3v2 frames, by name
	text    func(name string) bool // TXXX and items of APEv2
	comment func(name string) bool // COMM
	private []string               // PRIV, by owner
}

// levelled is for a copy with another level, encoded anew.
//
// TSSE names the encoder of the sound that was, and its settings: it would be untrue. TENC names who encoded the recording,
// a person or a station: it is kept like every other word about its history. TLEN is kept, for the length is. So are times
// that count MPEG frames instead of milliseconds (ETCO, SYTC, SYLT, POSS allow both): the copy has the source's sampling rate and
// so frames of the same length, and a sound is in the same frame or the one beside it, as the two encoders' delays differ.
var levelled = rule{
	frames: []string{
		"RVA2", "XRVA", "RVAD", "RGAD", // gains to play the sound at, as it was
		"MLLT", "ASPI", "SEEK", "RBUF", "TSIZ", // places and numbers of bytes in the file that was
		"TSSE",
	},
	text:    tags.Stale,
	comment: tags.PlayersNote,
	private: []string{"PeakValue", "AverageLevel"}, // levels, of a widespread player
}

// retagged is for the same sound with other gain tags. RVAD is no gain tag but how loud somebody wants it.
var retagged = rule{
	frames:  []string{"RVA2", "XRVA", "RGAD", "ASPI"}, // ASPI counts from the start of the file, which moves
	text:    tags.IsGain,
	comment: func(string) bool { return false },
}

// drops reports whether a frame is taken out.
func (r rule) drops(t *tag, f frame) bool {
	if slices.Contains(r.frames, f.id) {
		return true
	}
	body, _, ok := t.content(f)
	if !ok || len(body) == 0 {
		return false
	}
	switch f.id {
	case "TXXX":
		return r.text(text(body[0], body[1:]))
	case "COMM":
		const language = 3
		return len(body) > 1+language && r.comment(text(body[0], body[1+language:]))
	case "PRIV":
		return slices.Contains(r.private, text(0, body))
	}
	return false
}

// edited returns the tag, which was parsed from b, after a rule and with gains added.
func (t *tag) edited(b []byte, r rule, gains [][2]string) []byte {
	changed := len(gains) > 0
	var kept []frame
	for _, f := range t.frames {
		if r.drops(t, f) {
			changed = true
			continue
		}
		if mended, ok := t.mendChapter(f); ok {
			f, changed = mended, true
		}
		kept = append(kept, f)
	}
	for _, g := range gains {
		kept = append(kept, t.text(g[0], g[1]))
	}
	switch {
	case !changed:
		return b
	case len(kept) == 0: // a tag has at least one frame
		return nil
	}
	t.frames = kept
	if out := t.render(); int64(len(out)) == HeadLength(out) { // its size has room for no more
		return out
	}
	return b
}

// mendChapter makes a chapter be found by its times alone: its places in the file are marked as unused (chapter
// addendum 1.0, 3.1). ok is false if there is nothing to mend.
func (t *tag) mendChapter(f frame) (mended frame, ok bool) {
	if f.id != "CHAP" {
		return f, false
	}
	body, at, ok := t.content(f)
	end := bytes.IndexByte(body, 0) + 1 // of the chapter's own name
	const times, places = 8, 8
	if !ok || end == 0 || len(body) < end+times+places {
		return f, false
	}
	unused := bytes.Repeat([]byte{0xFF}, places)
	if bytes.Equal(body[end+times:][:places], unused) {
		return f, false
	}
	return t.with(f, at, slices.Concat(body[:end+times], unused, body[end+times+places:])), true
}

// modern returns the name that a frame has in 2.3 and 2.4, if its content is as there.
func modern(id []byte) string {
	name := strings.TrimRight(string(id), "\x00 ")
	if now := older[name]; now != "" {
		return now
	}
	return name
}
