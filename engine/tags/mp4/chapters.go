package mp4

import (
	"bytes"
	"encoding/binary"
	"io"
	"slices"
	"strings"
	"time"
	"unicode/utf8"

	"evenshelf/engine/tags"
)

// Chapters are kept in two ways. One is a box with a list of starts and titles (chpl), of which there is no standard:
// version, flags, four bytes of nothing, a count of one byte, then 64 bits of 100 ns and a title with its length in a byte.
// The other is QuickTime's: a track of titles, which the sound track refers to. Players read one or the other.

const (
	tick        = 100 * time.Nanosecond // of chpl
	maxListed   = 255
	maxTitle    = 255
	maxChapters = 10_000
	maxTitles   = 8 << 20 // bytes of a track of titles
)

// chapters reads the list, or where the track of titles has more, that.
func (f *file) chapters(sound *box) []tags.Chapter {
	list, track := listed(f.moov.child("udta", chapterBox)), f.titled(sound)
	if len(track) > len(list) {
		return track
	}
	return list
}

// listed reads the box. What is in front of damage is good.
func listed(x *box) (list []tags.Chapter) {
	if x == nil || len(x.body) < 5 {
		return nil
	}
	b := x.body[4:]
	if x.body[0] > 0 { // version 0 has not the four bytes
		b = b[min(4, len(b)):]
	}
	if len(b) == 0 {
		return nil
	}
	count, b := int(b[0]), b[1:]
	for range count {
		if len(b) < 9 || len(b) < 9+int(b[8]) {
			return list
		}
		if at := be64(b); at < uint64(1<<62/tick) {
			list = append(list, tags.Chapter{Start: time.Duration(at) * tick, Title: string(b[9:][:b[8]])})
		}
		b = b[9+int(b[8]):]
	}
	return list
}

// titled reads the first track of titles that the sound track refers to.
func (f *file) titled(sound *box) (list []tags.Chapter) {
	ids := references(sound.child("tref", "chap"))
	for _, trak := range f.moov.all("trak") {
		if slices.Contains(ids, trackID(trak)) && slices.Contains([]string{"text", "sbtl"}, handlerOf(trak.child("mdia"))) {
			return f.titlesOf(trak)
		}
	}
	return nil
}

func (f *file) titlesOf(trak *box) (list []tags.Chapter) {
	scale, movie := durationOf(trak.child("mdia", "mdhd")).scale, durationOf(f.moov.child("mvhd")).scale
	stbl := trak.child("mdia", "minf", "stbl")
	stts, stsz := stbl.child("stts"), stbl.child("stsz")
	chunks, err := f.chunks(stbl, maxTitles)
	edits, ok := editsOf(trak)
	if err != nil || !ok || scale == 0 || movie == 0 || stts == nil || len(stts.body) < 8 {
		return nil
	}
	var samples []byte
	for _, c := range chunks {
		b := make([]byte, c.len)
		if _, err := f.r.ReadAt(b, c.at); err != nil && err != io.EOF {
			return nil
		}
		samples = append(samples, b...)
	}
	at := int64(0) // of the first sample in the course of the movie, in the track's units
	for _, e := range edits {
		if e.start >= 0 {
			at -= e.start
			break
		}
		at += scaled(e.length, scale, movie)
	}
	runs, sizes := stts.body[8:], stsz.body[12:]
	fixed, n, left, step := be32(stsz.body[4:]), be32(stsz.body[8:]), uint32(0), int64(0)
	for i := range min(n, maxChapters) {
		size := fixed
		if fixed == 0 {
			size = be32(sizes[4*i:])
		}
		for left == 0 && len(runs) >= 8 {
			left, step, runs = be32(runs), int64(be32(runs[4:])), runs[8:]
		}
		if left == 0 || uint64(size) > uint64(len(samples)) {
			return list
		}
		if title, ok := titleOf(samples[:size]); ok && at >= 0 && (title != "" || step > 0) {
			list = append(list, tags.Chapter{Start: timeOf(at, scale), End: timeOf(at+step, scale), Title: title})
		}
		left, at, samples = left-1, at+step, samples[size:]
	}
	return list
}

// titleOf reads a sample of a text track: a length of two bytes, and text in UTF-8 or, with a mark, UTF-16.
func titleOf(b []byte) (string, bool) {
	if len(b) < 2 || int(binary.BigEndian.Uint16(b)) > len(b)-2 {
		return "", false
	}
	b = b[2:][:binary.BigEndian.Uint16(b)]
	if bytes.HasPrefix(b, []byte{0xFE, 0xFF}) || bytes.HasPrefix(b, []byte{0xFF, 0xFE}) {
		return fromUTF16(b), true
	}
	return strings.ToValidUTF8(string(b), "\uFFFD"), true
}

// timeOf converts a count of units to a time, rounded.
func timeOf(n int64, scale uint32) time.Duration {
	whole, rest := n/int64(scale), n%int64(scale)
	if whole > int64(1<<62/time.Second) {
		return 1 << 62
	}
	return time.Duration(whole)*time.Second + time.Duration((rest*int64(time.Second)+int64(scale)/2)/int64(scale))
}

// listOf makes the box of chapters. It has room for 255; the track of titles has all.
func listOf(chapters []tags.Chapter) *box {
	chapters = chapters[:min(len(chapters), maxListed)]
	b := append(full(1<<24), 0, 0, 0, 0, byte(len(chapters)))
	for _, ch := range chapters {
		title := cutText(ch.Title, maxTitle)
		b = binary.BigEndian.AppendUint64(b, uint64((ch.Start+tick/2)/tick))
		b = append(append(b, byte(len(title))), title...)
	}
	return &box{kind: chapterBox, body: b}
}

// cutText cuts text to so many bytes of UTF-8, not within a character.
func cutText(s string, most int) string {
	s = strings.ToValidUTF8(s, "\uFFFD")
	for len(s) > most {
		_, n := utf8.DecodeLastRuneInString(s)
		s = s[:len(s)-n]
	}
	return s
}
