package mp4

import (
	"encoding/binary"
	"errors"
	"io"
	"slices"
	"strconv"
	"strings"

	"evenshelf/engine/tags"
)

// WriteSheet completes a file with one sound track as FFmpeg writes it, ftyp, mdat, moov, in that order: it gets the items,
// chapters and language of a sheet instead of those it has. What is not text a player could show is left out.
func WriteSheet(f Target, size int64, s tags.Sheet) error {
	to, err := open(f, size)
	if err != nil {
		return err
	}
	sound, last := to.track("soun"), to.spans[len(to.spans)-1]
	if sound == nil || to.front() || last.kind != "moov" {
		return errUnexpected
	}
	to.moov.drop("udta", "meta")
	sound.drop("udta", "meta", "tref")
	list, err := itemList(to.moov)
	if err != nil {
		return err
	}
	fields := slices.Clone(s.Fields)
	if i := slices.IndexFunc(fields, isLanguage); i >= 0 {
		code, _ := packed(fields[i].Values[0])
		copy(language(sound.child("mdia", "mdhd")), code)
		fields = slices.Delete(fields, i, i+1)
	}
	if list.kids = append(itemsOf(fields), covers(s.Pictures)...); len(list.kids)+len(s.Chapters) == 0 {
		to.moov.drop("udta")
	}
	at := last.at
	if chapters := s.Chapters[:min(len(s.Chapters), maxChapters)]; len(chapters) > 0 {
		udta := to.moov.child("udta")
		udta.kids = append(udta.kids, listOf(chapters))
		id := trackID(sound) + 1
		trak, samples := titles(chapters, id, durationOf(to.moov.child("mvhd")), at+boxHead)
		if h, ok := headerOf(to.moov.child("mvhd")); ok {
			binary.BigEndian.PutUint32(h.x.body[len(h.x.body)-4:], id+1) // the next free one
		}
		sound.replace("tref", &box{kind: "tref", kids: []*box{{kind: "chap", body: put32(nil, id)}}})
		to.moov.kids = slices.Insert(to.moov.kids, slices.Index(to.moov.kids, sound)+1, trak)
		if _, err := io.NewOffsetWriter(f, at).Write(boxRow("mdat", string(samples))); err != nil {
			return err
		}
		at += int64(boxHead + len(samples))
	}
	return writeAll(f, at, []*box{to.moov})
}

var errUnexpected = errors.New("FFmpeg has not written the MP4 that was expected")

// isLanguage reports whether a field fits a track's header, which has room for one language of three letters.
func isLanguage(f tags.Field) bool {
	if f.Name != "LANGUAGE" || len(f.Values) != 1 {
		return false
	}
	_, ok := packed(f.Values[0])
	return ok
}

// itemsOf makes items of fields: those that have a four-character name first, then the freeform ones.
func itemsOf(fields []tags.Field) (list []*box) {
	s := tags.Sheet{Fields: fields}
	done := map[string]bool{}
	for _, t := range texts {
		if values := s.Values(t[1]); len(values) > 0 {
			list, done[t[1]] = append(list, item(t[0], values)), true
		}
	}
	for _, n := range numbers {
		if v, ok := whole(s.Values(n.name), 1<<(8*n.bytes-1)); ok {
			b := binary.BigEndian.AppendUint16(nil, uint16(v))[2-n.bytes:]
			list, done[n.name] = append(list, &box{kind: n.kind, kids: []*box{content(signed, b)}}), true
		}
	}
	for _, p := range pairs {
		b := make([]byte, p.bytes)
		for i, name := range []string{p.name, p.total} {
			if v, ok := whole(s.Values(name), 1<<16); ok {
				binary.BigEndian.PutUint16(b[2+2*i:], uint16(v))
				done[name] = true
			}
		}
		if done[p.name] || done[p.total] {
			list = append(list, &box{kind: p.kind, kids: []*box{content(implicit, b)}})
		}
	}
	for _, f := range fields {
		if !done[f.Name] && len(f.Values) > 0 {
			list = append(list, named(tags.InWords(f.Name), f.Values))
		}
	}
	return list
}

// whole reads values as one number below a limit, in the way that it would be written again.
func whole(values []string, limit int) (int, bool) {
	if len(values) != 1 {
		return 0, false
	}
	digits := strings.TrimLeft(values[0], "0")
	n, err := strconv.Atoi(digits)
	return n, err == nil && n > 0 && n < limit && strconv.Itoa(n) == digits
}

// item is one with texts.
func item(kind string, values []string) *box {
	x := &box{kind: kind}
	for _, v := range values {
		x.kids = append(x.kids, content(utf8Text, []byte(strings.ToValidUTF8(v, "\uFFFD"))))
	}
	return x
}

// named is a freeform item: its name is in words.
func named(name string, values []string) *box {
	x := item("----", values)
	x.kids = append([]*box{{kind: "mean", body: full(0, []byte(freeform)...)}, {kind: "name", body: full(0, []byte(name)...)}}, x.kids...)
	return x
}

// content is data of a type, of no country.
func content(kind uint32, b []byte) *box {
	return &box{kind: "data", body: append(put32(put32(nil, kind), 0), b...)}
}

// covers makes the item of pictures. Those that are none of the types it has, as links are, and those for which there is no
// room are left out.
func covers(pictures []tags.Picture) []*box {
	x, left := &box{kind: coverItem}, maxMovie/2
	for _, p := range pictures {
		if kind := images[tags.MIME(p.Data)]; kind != 0 && len(p.Data) <= left {
			x.kids = append(x.kids, content(kind, p.Data))
			left -= len(p.Data)
		}
	}
	if len(x.kids) == 0 {
		return nil
	}
	return []*box{x}
}
