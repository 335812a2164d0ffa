package id3

import (
	"bytes"
	"io"
	"slices"
	"testing"

	"evenshelf/engine/tags"
)

var someGains = tags.Gains{Track: tags.Loudness{Integrated: -10, Peak: 1}}

// Whatever the bytes: nothing panics; the frames that are kept come out as they went in, or mended; and what has been
// edited stays as it is when it is edited again.
func FuzzID3(f *testing.F) {
	gain := "\x00replaygain_track_gain\x00-7 dB"
	chapter := "c\x00\x00\x00\x00\x00\x00\x00\xFF\x00" + places
	f.Add(made(2, 0, framed(2, "TXX", 0, gain), framed(2, "TT2", 0, "\x00T"), make([]byte, 9)))
	f.Add(made(3, 0xC0, []byte{0, 0, 0, 6, 0, 0, 0, 0, 0, 5}, framed(3, "TXXX", 0x40, gain), framed(3, "CHAP", 0, chapter)))
	f.Add(slices.Concat(made(4, 0x80, framed(4, "CHAP", 3, "\x00\x00\x00\x01"+chapter), framed(4, "RVA2", 0, "x")), made(4, 0x10, framed(4, "TIT2", 0, "\x00T"))))
	f.Add(madeAPE(true, "Title", "T", "REPLAYGAIN_TRACK_GAIN", "x"))
	f.Fuzz(func(t *testing.T, head []byte) {
		if len(head) > 1<<16 {
			return
		}
		before := frames(head, levelled)
		front, _ := Levelled(head, nil)
		if after := frames(front, rule{text: none, comment: none}); !slices.EqualFunc(before, after, bytes.Equal) {
			t.Fatalf("frames %q became %q", before, after)
		}
		if again, _ := Levelled(front, nil); !bytes.Equal(again, front) {
			t.Fatalf("edited %q, again %q", front, again)
		}
		retaggedTwice(t, head)
	})
}

func none(string) bool { return false }

// frames returns the frames and items of all tags in a row that a rule leaves, without their sizes, which may be mended.
func frames(b []byte, r rule) (list [][]byte) {
	for _, b := range headTags(b) {
		if !isID3(b) {
			if a, ok := parseAPE(b); ok {
				for _, item := range a.items {
					if !r.text(item.key) {
						list = append(list, item.raw)
					}
				}
			}
			continue
		}
		tag, ok := parse(b)
		if !ok {
			continue
		}
		for _, f := range tag.frames {
			if r.drops(tag, f) {
				continue
			}
			if mended, ok := tag.mendChapter(f); ok {
				f = mended
			}
			size := 4
			if tag.version() == 2 {
				size = 3
			}
			list = append(list, slices.Concat([]byte(f.raw[:size]), f.raw[2*size:]))
		}
	}
	return list
}

// retaggedTwice gives a file other gain tags, twice, which has to be the same as once.
func retaggedTwice(t *testing.T, file []byte) {
	var once, twice bytes.Buffer
	if err := Retag(&once, io.NewSectionReader(bytes.NewReader(file), 0, int64(len(file))), someGains); err != nil {
		t.Fatal(err)
	}
	if err := Retag(&twice, io.NewSectionReader(bytes.NewReader(once.Bytes()), 0, int64(once.Len())), someGains); err != nil {
		t.Fatal(err)
	}
	if !bytes.Equal(once.Bytes(), twice.Bytes()) {
		t.Fatalf("%q, retagged again %q", once.Bytes(), twice.Bytes())
	}
}

// Whatever follows the sound: nothing panics, no byte is made up, and pieces put together are what they were cut from.
func FuzzTail(f *testing.F) {
	v1 := append([]byte("TAGA song"), make([]byte, 119)...)
	f.Add(slices.Concat(madeAPE(true, "Title", "T", "REPLAYGAIN_TRACK_GAIN", "x"), []byte("LYRICSBEGIN000011LYRICS200"), v1, make([]byte, 9)))
	f.Add(slices.Concat(make([]byte, 9), made(4, 0x10, framed(4, "TXXX", 0, "\x00GAIN\x00")), madeAPE(false, "R128_TRACK_GAIN", "x"), make([]byte, 300)))
	f.Fuzz(func(t *testing.T, tail []byte) {
		if len(tail) > 1<<16 {
			return
		}
		var whole []byte
		for _, p := range tailPieces(tail) {
			whole = append(whole, p.bytes...)
		}
		if !bytes.Equal(whole, tail) {
			t.Fatalf("%q was cut into %q", tail, whole)
		}
		if _, back := Levelled(nil, tail); len(back) > len(tail)+32 {
			t.Fatalf("%q grew to %q", tail, back)
		}
		start, err := TailStart(bytes.NewReader(tail), 0, int64(len(tail)))
		if err != nil || start < 0 || start > int64(len(tail)) {
			t.Fatalf("it begins at %d: %v", start, err)
		}
		var out bytes.Buffer
		if err := Retag(&out, io.NewSectionReader(bytes.NewReader(tail), 0, int64(len(tail))), someGains); err != nil {
			t.Fatal(err)
		}
	})
}
