package id3

import (
	"bytes"
	"encoding/binary"
	"math"
	"slices"
	"strings"
	"time"

	"evenshelf/engine/tags"
)

// ReadSheet reads what the tags in front of a recording's sound and behind it say: ID3v2 first, APEv2 for names that it
// does not have, and ID3v1, which cuts words off, last.
//
// These are left out, for no other carrier has a word for them or they are about the file: POPM and PCNT (how one listener
// liked it), PRIV, GEOB, MCDI, SYLT, USER, OWNE, COMR, links to pictures, languages of comments and lyrics, TLEN, TSSE,
// and frames that are compressed or encrypted.
func ReadSheet(head, tail []byte) (s tags.Sheet) {
	front, back := headTags(head), tailPieces(tail)
	var whole [][]byte
	whole = append(whole, front...)
	for _, p := range slices.Backward(back) {
		if p.tag {
			whole = append(whole, p.bytes)
		}
	}
	for _, b := range whole {
		if t, ok := parse(b); ok && isID3(b) {
			s.Merge(t.sheet())
		}
	}
	for _, read := range []func([]byte) tags.Sheet{apeSheet, v1Sheet} {
		for _, b := range whole {
			s.Merge(read(b))
		}
	}
	return s
}

// What of a tag is read for a sheet: whoever has more has it from a machine gone mad.
const (
	maxFrames = 5000
	maxValues = 500 // of one field
)

// sheet returns what one ID3v2 tag says.
func (t *tag) sheet() (s tags.Sheet) {
	var date dates
	for _, f := range t.frames[:min(len(t.frames), maxFrames)] {
		body, _, ok := t.content(f)
		if !ok || len(body) == 0 {
			continue
		}
		switch f.id {
		case "CHAP":
			if c, ok := t.chapter(body); ok && len(s.Chapters) < tags.Most {
				s.Chapters = append(s.Chapters, c)
			}
		case "APIC", "PIC":
			if p, ok := picture(f.id, body); ok && len(s.Pictures) < tags.Most {
				s.Pictures = append(s.Pictures, p)
			}
		case "TYER", "TDAT", "TIME":
			date.take(f.id, text(body[0], body[1:]))
		default:
			t.field(&s, f.id, body)
		}
	}
	if s.Values("DATE") == nil {
		s.Add("DATE", date.String())
	}
	s.Settle()
	return s
}

// field adds what a frame says to a sheet.
func (t *tag) field(s *tags.Sheet, id string, body []byte) {
	const language = 3
	encoding, rest := body[0], body[1:]
	switch {
	case id == "UFID":
		owner, value := cut(0, body)
		if name := "UFID:" + strings.ToUpper(owner); owner == recordingID {
			s.Add(recordingName, tags.Guess(value))
		} else if owner != "" && printable(value) {
			s.Add(name, string(value))
		}
	case id == "COMM" && len(rest) >= language, id == "USLT" && len(rest) >= language:
		about, rest := cut(encoding, rest[language:])
		if id == "USLT" {
			about = "" // a name of the words, which nobody else keeps
		}
		const copied = "ID3v1 Comment" // what one tagger writes beside the comment
		if about != copied && !tags.PlayersNote(about) {
			addAll(s, withDescription(nameOf[id], about), list(encoding, rest))
		}
	case id == "COMM", id == "USLT":
	case id == "TXXX":
		about, rest := cut(encoding, rest)
		addAll(s, tags.FromWords(strings.TrimSpace(about)), list(encoding, rest))
	case id == "WXXX":
		about, rest := cut(encoding, rest)
		addAll(s, withDescription(nameOf[id], about), []string{tags.Guess(rest)})
	case id == "TIPL", id == "TMCL", id == "IPLS":
		people(s, list(encoding, rest))
	case slices.Contains(leftOut, id):
	case id[0] == 'T':
		t.texts(s, id, list(encoding, rest))
	case nameOf[id] != "":
		s.Add(nameOf[id], tags.Guess(body))
	}
}

// withDescription is the name of a field of which there are several, told apart by a description.
func withDescription(name, about string) string {
	if about = strings.ToUpper(strings.TrimSpace(about)); about == "" {
		return name
	}
	return name + ":" + about
}

// texts adds what a text frame says.
func (t *tag) texts(s *tags.Sheet, id string, values []string) {
	name := nameOf[id]
	switch {
	case name == "" && onlyRead[id] != "":
		name = onlyRead[id]
	case name == "":
		name = id
	}
	if t.version() < 4 && slices.Contains([]string{"TCOM", "TEXT", "TOLY", "TOPE", "TPE1"}, id) {
		values = slashed(values)
	}
	if id == "TCON" {
		var all []string
		for _, v := range values {
			all = append(all, genresOf(v)...)
		}
		values = all
	}
	addAll(s, name, values)
}

// addAll adds values to a field, which may be numbers with what they are out of: "3/12".
func addAll(s *tags.Sheet, name string, values []string) {
	for _, v := range values {
		has := s.Values(name)
		switch total := totals[name]; {
		case slices.Contains(has, v) || len(has) >= maxValues: // some frames repeat others
		case total != "":
			s.AddNumber(name, total, strings.TrimSpace(v))
		default:
			s.Add(name, v)
		}
	}
}

// people adds the people of a list in which parts and names take turns.
func people(s *tags.Sheet, pairs []string) {
	for ; len(pairs) >= 2; pairs = pairs[2:] {
		part, name := pairs[0], pairs[1]
		switch {
		case name == "":
		case nameInvolved[part] != "":
			s.Add(nameInvolved[part], name)
		case part == "":
			s.Add("PERFORMER", name)
		default:
			s.Add("PERFORMER", name+" ("+part+")")
		}
	}
}

// chapter reads a chapter's times, in milliseconds, and its title (chapter addendum 1.0, 3.1).
func (t *tag) chapter(body []byte) (c tags.Chapter, ok bool) {
	_, rest, ended := bytes.Cut(body, []byte{0})
	const fixed = 16 // two times and two places
	if !ended || len(rest) < fixed {
		return c, false
	}
	start, end := binary.BigEndian.Uint32(rest), binary.BigEndian.Uint32(rest[4:])
	c.Start = time.Duration(start) * time.Millisecond
	if end != math.MaxUint32 && end > start {
		c.End = time.Duration(end) * time.Millisecond
	}
	inner := tag{head: t.head}
	inner.frames, _ = walk(rest[fixed:], t.frameHead(), t.sizeOf)
	for _, f := range inner.frames {
		if b, _, ok := inner.content(f); ok && f.id == "TIT2" && len(b) > 0 {
			c.Title = text(b[0], b[1:])
		}
	}
	return c, true
}

// picture reads an APIC frame, or 2.2's PIC, which has three letters for the kind of picture.
func picture(id string, b []byte) (p tags.Picture, ok bool) {
	encoding, rest := b[0], b[1:]
	switch {
	case id == "APIC":
		p.MIME, rest = cut(0, rest)
	case len(rest) > 3:
		p.MIME, rest = string(rest[:3]), rest[3:]
	}
	if p.MIME == "-->" || len(rest) == 0 { // it is elsewhere
		return p, false
	}
	if p.MIME = strings.ToLower(p.MIME); p.MIME != "" && !strings.Contains(p.MIME, "/") {
		p.MIME = "image/" + p.MIME
	}
	if p.MIME == "image/jpg" {
		p.MIME = "image/jpeg"
	}
	p.Kind = int(rest[0])
	p.Description, p.Data = cut(encoding, rest[1:])
	p.Description = strings.TrimRight(p.Description, " ")
	return p, len(p.Data) > 0
}

func printable(b []byte) bool {
	return len(b) > 0 && !slices.ContainsFunc(b, func(c byte) bool { return c < ' ' || c > '~' })
}
