package id3

import (
	"encoding/binary"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"evenshelf/engine/tags"
)

// WriteSheet returns an ID3v2.4 tag that says what a sheet does, without padding; nil if it says nothing. Gains and the
// like, which go stale, are left out, and so are pictures for which a tag has no room.
//
// It is 2.4 because 2.3 has no way to tell several values from one with a slash in it and no month without a day, and all
// that is still made reads it.
func WriteSheet(s tags.Sheet) []byte {
	w := sheetWriter{tag: tag{head: [headLen]byte{'I', 'D', '3', 4}}, sheet: &s, told: map[string]int{}}
	for _, f := range s.Fields {
		if !tags.Stale(f.Name) && len(f.Values) > 0 {
			w.field(f.Name, f.Values)
		}
	}
	w.people()
	w.chapters(s.Chapters)
	s.Pictures = slices.Clone(s.Pictures)
	s.Settle()
	for _, p := range s.Pictures {
		w.picture(p)
	}
	if len(w.frames) == 0 {
		return nil
	}
	return w.render()
}

type sheetWriter struct {
	tag
	sheet *tags.Sheet
	size  int            // of all frames
	told  map[string]int // how many frames there are of a name and description
	parts []string       // TIPL: parts and names in turns
	roles []string       // TMCL: the same
}

// add adds a frame, unless there is no room for it.
func (w *sheetWriter) add(id string, body ...string) {
	all := strings.Join(body, "")
	if w.size+headLen+len(all) >= MaxLength-headLen {
		return
	}
	w.size += headLen + len(all)
	w.frames = append(w.frames, made4(id, all))
}

// made4 is a frame of 2.4.
func made4(id, body string) frame {
	raw := append(make([]byte, headLen), body...)
	copy(raw, id)
	putSyncsafe(raw[4:], len(body))
	return frame{id, raw}
}

// encoded returns the byte that tells the encoding of some texts: ISO 8859-1 where that is enough for all, for ASCII is
// the same in it, else UTF-8.
func encoded(texts ...string) string {
	for _, t := range texts {
		if strings.ContainsFunc(t, func(r rune) bool { return r > '~' }) {
			return "\x03"
		}
	}
	return "\x00"
}

// plainText is a text without what would end it.
func plainText(s string) string { return strings.ToValidUTF8(strings.ReplaceAll(s, "\x00", ""), "") }

func (w *sheetWriter) texts(id string, values ...string) {
	w.add(id, encoded(values...), strings.Join(values, "\x00"))
}

// field writes one field in the frame, or frames, there is for it.
func (w *sheetWriter) field(name string, values []string) {
	values = slices.Clone(values)
	for i, v := range values {
		values[i] = plainText(v)
	}
	kind, about, _ := strings.Cut(name, ":")
	if isDate[frameOf[name]] {
		for i, v := range values {
			values[i] = stamped(v)
		}
	}
	switch id := frameOf[name]; {
	case name == recordingName && len(values) == 1:
		w.add("UFID", recordingID, "\x00", values[0])
	case kind == "UFID" && about != "":
		w.add("UFID", plainText(about), "\x00", values[0])
	case kind == "COMMENT", kind == "LYRICS", kind == "URL":
		w.several(frameOf[kind], plainText(about), values)
	case involvedAs[name] != "":
		for _, v := range values {
			w.parts = append(w.parts, involvedAs[name], v)
		}
	case name == "PERFORMER":
		for _, v := range values {
			part, name := role(v)
			w.roles = append(w.roles, part, name)
		}
	case totals[name] != "":
		w.numbers(id, values, w.sheet.Values(totals[name]))
	case w.besideNumber(name):
	case isDate[id] && slices.ContainsFunc(values, func(v string) bool { return !timestamp.MatchString(v) }):
		w.described(name, values)
	case id == "" || w.told[id] > 0 || id[0] == 'W' && len(values) > 1: // several names have one frame; an address stands alone
		w.described(name, values)
	case id[0] == 'W':
		w.told[id]++
		w.add(id, values[0])
	default:
		w.told[id]++
		w.texts(id, values...)
	}
}

// several writes values of which each has a frame. Frames of one kind must have different descriptions: spaces behind them,
// which nobody sees, make them so.
func (w *sheetWriter) several(id, about string, values []string) {
	language := "XXX" // not known (2.4.0 frames, 4)
	if l := w.sheet.Values("LANGUAGE"); len(l) > 0 && isLanguage(l[0]) {
		language = l[0]
	}
	for _, v := range values {
		about := w.unlike(id, about)
		switch e := encoded(about, v); id {
		case "WXXX":
			w.add(id, encoded(about), about, "\x00", v)
		default:
			w.add(id, e, language, about, "\x00", v)
		}
	}
}

// isLanguage reports whether a text can be a code of ISO 639-2.
func isLanguage(s string) bool {
	return len(s) == 3 && strings.Trim(s, "abcdefghijklmnopqrstuvwxyz") == ""
}

// unlike returns a description with as many spaces behind it as make it unlike all others of its kind.
func (w *sheetWriter) unlike(id, about string) string {
	about = strings.TrimRight(about, " ")
	n := w.told[id+about]
	w.told[id+about]++
	return about + strings.Repeat(" ", n)
}

// described writes a field that has no frame of its own.
func (w *sheetWriter) described(name string, values []string) {
	about := plainText(tags.InWords(name))
	w.add("TXXX", encoded(append([]string{about}, values...)...), about, "\x00", strings.Join(values, "\x00"))
}

// numbers writes numbers with what they are out of: "3/12".
func (w *sheetWriter) numbers(id string, values, out []string) {
	for i, v := range values {
		if i < len(out) && !strings.Contains(v, "/") {
			values[i] = v + "/" + plainText(out[i])
		}
	}
	w.texts(id, values...)
}

// besideNumber reports whether a field is a total that stands beside its number.
func (w *sheetWriter) besideNumber(name string) bool {
	for number, total := range totals {
		if total == name {
			return len(w.sheet.Values(number)) >= len(w.sheet.Values(total))
		}
	}
	return false
}

// role takes "Name (part)" apart.
func role(s string) (part, name string) {
	if before, after, found := strings.Cut(s, " ("); found && strings.HasSuffix(after, ")") && before != "" {
		return strings.TrimSuffix(after, ")"), before
	}
	return "", s
}

func (w *sheetWriter) people() {
	if len(w.parts) > 0 {
		w.texts("TIPL", w.parts...)
	}
	if len(w.roles) > 0 {
		w.texts("TMCL", w.roles...)
	}
}

func (w *sheetWriter) picture(p tags.Picture) {
	about := w.unlike("APIC", plainText(p.Description))
	w.add("APIC", encoded(about), plainText(p.MIME), "\x00", string([]byte{byte(p.Kind)}), about, "\x00", string(p.Data))
}

// chapters writes chapters and tables of contents: one, or one of several, for a table has room for 255 names
// (chapter addendum 1.0, 3.1 and 3.2). A chapter whose end is not known ends where the next begins; the last says that its
// end is not used.
func (w *sheetWriter) chapters(list []tags.Chapter) {
	if len(list) == 0 {
		return
	}
	var children []string
	for i, c := range list[:min(len(list), tags.Most)] {
		end := uint32(math.MaxUint32)
		switch {
		case c.End > c.Start:
			end = milliseconds(c.End)
		case i+1 < len(list):
			end = milliseconds(list[i+1].Start)
		}
		id := "c" + strconv.Itoa(i+1) + "\x00"
		children = append(children, id)
		times := binary.BigEndian.AppendUint32(nil, milliseconds(c.Start))
		times = binary.BigEndian.AppendUint32(times, end)
		title := plainText(c.Title)
		inner := made4("TIT2", encoded(title)+title).raw
		if title == "" {
			inner = nil
		}
		w.add("CHAP", id, string(times), strings.Repeat("\xFF", 8), string(inner))
	}
	const most, ordered, top = 255, 1, 2
	table := func(id string, flags byte, children []string) {
		w.add("CTOC", id, string([]byte{flags, byte(len(children))}), strings.Join(children, ""))
	}
	if len(children) > most {
		var tables []string
		for part := range slices.Chunk(children, most) {
			id := "t" + strconv.Itoa(len(tables)+1) + "\x00"
			table(id, ordered, part)
			tables = append(tables, id)
		}
		children = tables
	}
	table("toc\x00", top|ordered, children)
}

func milliseconds(d time.Duration) uint32 {
	return uint32(min(max(d.Round(time.Millisecond).Milliseconds(), 0), math.MaxUint32-1))
}
