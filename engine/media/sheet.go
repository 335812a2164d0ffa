package media

import (
	"evenshelf/engine/tags"
	"evenshelf/engine/tags/id3"
)

// sheet returns what a source carries beside its sound, for a target of another format. It is not ok if the source's format
// is not one whose words are known here, or they cannot be read.
func (t *tagSource) sheet() (s tags.Sheet, ok bool) {
	if t == nil {
		return s, false
	}
	switch t.kind.container {
	case "mp3", "aac":
		return t.sheetAtEnds()
	case "wav":
		return t.wavSheet()
	case "aiff":
		return t.aiffSheet()
	}
	return s, false
}

// sheetAtEnds reads the tags that stand in front of the format's own bytes and behind them: ID3 and APEv2.
func (t *tagSource) sheetAtEnds() (s tags.Sheet, ok bool) {
	from, err := id3.TailStart(t.f, t.kind.start, t.size)
	if err != nil {
		return s, false
	}
	head, err1 := readAt(t.f, 0, int(min(t.kind.start, id3.MaxLength)))
	tail, err2 := readAt(t.f, from, int(min(t.size-from, id3.MaxLength)))
	return id3.ReadSheet(head, tail), err1 == nil && err2 == nil
}
