package mp4

import (
	"encoding/binary"
	"io"
	"slices"
	"strconv"
	"strings"
	"unicode/utf16"
	"unicode/utf8"

	"evenshelf/engine/tags"
)

// ReadSheet reads what a file says of its first sound track: the items that players read, chapters, and the language. It
// is an error if there is none of these items, as in files of QuickTime's own kind, or if the boxes are damaged.
func ReadSheet(r io.ReaderAt, size int64) (s tags.Sheet, err error) {
	f, err := open(r, size)
	if err != nil {
		return s, err
	}
	sound := f.track("soun")
	found := false
	for _, meta := range f.moov.child("udta").all("meta") {
		if list := meta.child("ilst"); list != nil && handlerOf(meta) == "mdir" {
			found = true
			name := namesOf(meta)
			for _, item := range list.kids {
				readItem(&s, item, name(item))
			}
		}
	}
	if !found || sound == nil {
		return s, damage("there are no items")
	}
	s.Chapters = f.chapters(sound)
	if b := language(sound.child("mdia", "mdhd")); b != nil && len(s.Values("LANGUAGE")) == 0 {
		if word := unpacked(b); word != "und" {
			s.Add("LANGUAGE", word)
		}
	}
	return s, nil
}

// data are the contents of an item, by their types.
func data(item *box) (list []*box) {
	for _, p := range parts(item.body) {
		if p.kind == "data" && len(p.body) >= dataHead {
			list = append(list, p)
		}
	}
	return list
}

// readItem adds an item to a sheet. What it does not understand it leaves out.
func readItem(s *tags.Sheet, item *box, name string) {
	for _, d := range data(item) {
		kind, b := be32(d.body)&0xFFFFFF, d.body[dataHead:]
		switch {
		case item.kind == coverItem:
			p := tags.Picture{MIME: tags.MIME(b), Data: slices.Clone(b)}
			if len(s.Pictures) == 0 { // there is no word for what a cover shows; players take the first for the front
				p.Kind = tags.FrontCover
			}
			s.Pictures = append(s.Pictures, p)
		case item.kind == "----":
			if text, ok := textOf(kind, b); ok {
				s.Add(tags.FromWords(name), text)
			}
		case item.kind == genreItem && len(b) == 2:
			if n := int(binary.BigEndian.Uint16(b)); n >= 1 && n <= len(tags.Genres) {
				s.Add("GENRE", tags.Genres[n-1])
			}
		default:
			readNative(s, item.kind, kind, b)
		}
	}
}

// readNative adds one of the contents of an item that has a four-character name.
func readNative(s *tags.Sheet, item string, kind uint32, b []byte) {
	for _, t := range texts {
		if text, ok := textOf(kind, b); ok && t[0] == item {
			s.Add(t[1], text)
		}
	}
	for _, n := range numbers {
		if n.kind == item && len(b) >= 1 && len(b) <= 8 {
			if v := int64(be64(append(make([]byte, 8-len(b)), b...))); v > 0 {
				s.Add(n.name, strconv.FormatInt(v, 10))
			}
		}
	}
	for _, p := range pairs {
		if p.kind == item && len(b) >= 6 {
			for i, name := range []string{p.name, p.total} {
				if v := binary.BigEndian.Uint16(b[2+2*i:]); v > 0 {
					s.Add(name, strconv.Itoa(int(v)))
				}
			}
		}
	}
}

// textOf reads text; ok is false if it is something else.
func textOf(kind uint32, b []byte) (text string, ok bool) {
	switch kind {
	case implicit, utf8Text:
		text = string(b)
		return text, utf8.ValidString(text) && !strings.Contains(text, "\x00")
	case utf16Text:
		return fromUTF16(b), true
	}
	return "", false
}

// fromUTF16 reads UTF-16, the high byte first unless a mark says otherwise.
func fromUTF16(b []byte) string {
	order := binary.ByteOrder(binary.BigEndian)
	if len(b) >= 2 && (b[0] == 0xFE && b[1] == 0xFF || b[0] == 0xFF && b[1] == 0xFE) {
		if b[0] == 0xFF {
			order = binary.LittleEndian
		}
		b = b[2:]
	}
	units := make([]uint16, len(b)/2)
	for i := range units {
		units[i] = order.Uint16(b[2*i:])
	}
	return string(utf16.Decode(units))
}

// unpacked reads the three letters of a language, of five bits each (14496-12, 8.4.2). QuickTime's numbers are none.
func unpacked(b []byte) string {
	v, word := binary.BigEndian.Uint16(b), ""
	for _, shift := range []int{10, 5, 0} {
		c := v >> shift & 31
		if c < 1 || c > 26 {
			return "und"
		}
		word += string(rune('a' - 1 + c))
	}
	return word
}

// packed is the inverse of it; ok is false if the word is not three small letters.
func packed(word string) (b []byte, ok bool) {
	v := uint16(0)
	for _, c := range []byte(word) {
		if c < 'a' || c > 'z' {
			return nil, false
		}
		v = v<<5 | uint16(c-'a'+1)
	}
	return binary.BigEndian.AppendUint16(nil, v), len(word) == 3
}
