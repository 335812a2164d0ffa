package mp4

import (
	"bytes"
	"math"
	"slices"
	"testing"
)

// Sizes of 32 and 64 bits and the two forms of a meta box come out as they went in; what is damaged stays a box of bytes.
func TestBoxesComeOutAsTheyWentIn(t *testing.T) {
	item := "\x00\x00\x00\x0cABCDbody"
	list := "\x00\x00\x00\x14ilst" + item
	for name, test := range map[string]struct {
		in    string
		items int
	}{
		"14496-12":        {"\x00\x00\x00\x28meta\x00\x00\x00\x00\x00\x00\x00\x08hdlr" + list, 1},
		"QuickTime":       {"\x00\x00\x00\x24meta\x00\x00\x00\x08hdlr" + list, 1},
		"64 bits":         {"\x00\x00\x00\x01meta\x00\x00\x00\x00\x00\x00\x00\x2c\x00\x00\x00\x08hdlr" + list, 1},
		"terminator":      {"\x00\x00\x00\x28meta\x00\x00\x00\x08hdlr" + list + "\x00\x00\x00\x00", 1},
		"item too long":   {"\x00\x00\x00\x24meta\x00\x00\x00\x08hdlr\x00\x00\x00\x14ilst\x00\x00\x00\x0dABCDbody", 0},
		"list too long":   {"\x00\x00\x00\x24meta\x00\x00\x00\x08hdlr\x00\x00\x00\x15ilst" + item, 0},
		"item of 3 bytes": {"\x00\x00\x00\x24meta\x00\x00\x00\x08hdlr\x00\x00\x00\x14ilst\x00\x00\x00\x03ABCDbody", 0},
	} {
		left := maxBoxes
		boxes, rest, err := parse([]byte(test.in), 0, &left)
		if err != nil || len(boxes) != 1 || len(rest) != 0 {
			t.Errorf("%s: %d boxes, %d bytes left: %v", name, len(boxes), len(rest), err)
			continue
		}
		if got := written(t, boxes...); string(got) != test.in || boxes[0].size() != int64(len(test.in)) {
			t.Errorf("%s: %q", name, got)
		}
		if n := len(boxes[0].child("ilst").list()); n != test.items {
			t.Errorf("%s: %d items", name, n)
		}
	}
}

// A box within a box within a box, or very many of them, are no recording.
func TestBoxesAreBounded(t *testing.T) {
	deep := []byte("\x00\x00\x00\x08udta")
	for range maxDepth + 2 {
		deep = slices.Concat(put32(nil, uint32(len(deep)+8)), []byte("moov"), deep)
	}
	left := maxBoxes
	if _, _, err := parse(deep, 0, &left); err == nil {
		t.Error("so deep")
	}
	left = maxBoxes
	if _, _, err := parse(bytes.Repeat([]byte("\x00\x00\x00\x08free"), maxBoxes+1), 0, &left); err == nil {
		t.Error("so many")
	}
}

// Durations by hand: 700 ms are 30 870 frames at 44.1 kHz; 30 hours are 4 762 800 000, which needs 64 bits.
func TestScalesOfTime(t *testing.T) {
	if got := scaled(700, 44100, 1000); got != 30_870 {
		t.Error(got)
	}
	if got := scaled(math.MaxUint64, math.MaxUint32, 1); got != math.MaxInt64 {
		t.Error(got)
	}
	for _, list := range [][]edit{{{700, 1024, 1 << 16}}, {{5, -1, 1 << 16}, {4_762_800_000, 0, 1 << 16}}} {
		x := elst(list)
		got, ok := editsOf(&box{kids: []*box{{kind: "edts", kids: []*box{x}}}})
		if wide := x.body[0] == 1; !ok || !slices.Equal(got, list) || wide != (list[0].start < 0) {
			t.Errorf("%v: %v", list, got)
		}
	}
	tkhd := &box{kind: "tkhd", body: make([]byte, 84)}
	copy(tkhd.body[20:], put32(nil, 30*3600*1000))
	trak := &box{kids: []*box{tkhd}}
	movie := func(scale uint32) *box {
		x := &box{kind: "mvhd", body: make([]byte, 100)}
		copy(x.body[12:], put32(nil, scale))
		return &box{kids: []*box{x}}
	}
	if err := rescale(trak, movie(44100), movie(1000)); err != nil || be32(tkhd.body[20:]) != math.MaxUint32 {
		t.Errorf("% x: %v", tkhd.body[20:24], err)
	}
}

// Times go from either version of a header to the other, where they fit.
func TestTimesOfHeaders(t *testing.T) {
	narrow := &box{body: append([]byte{0, 0, 0, 0, 0, 0, 0, 1, 0, 0, 0, 2}, make([]byte, 20)...)}
	wide := &box{body: append([]byte{1, 0, 0, 0, 0, 0, 0, 1, 0, 0, 0, 3, 0, 0, 0, 0, 0, 0, 0, 4}, make([]byte, 20)...)}
	takeTimes(narrow, wide)
	if got := narrow.body[4:12]; !bytes.Equal(got, []byte{0, 0, 0, 1, 0, 0, 0, 4}) { // 2^32 + 3 does not fit
		t.Errorf("% x", got)
	}
	takeTimes(wide, narrow)
	if got := wide.body[4:20]; !bytes.Equal(got, []byte{0, 0, 0, 0, 0, 0, 0, 1, 0, 0, 0, 0, 0, 0, 0, 4}) {
		t.Errorf("% x", got)
	}
}

// Pictures that a movie's meta box finds by their place in the file cannot come along; the copy is made without.
func TestItemsByPlaceAreLeftOut(t *testing.T) {
	source := load(t, made(t, "a.m4a", madeFiles["front.m4a"]...))
	f, err := open(bytes.NewReader(source), int64(len(source)))
	if err != nil {
		t.Fatal(err)
	}
	f.moov.kids = append(f.moov.kids, &box{kind: "meta", body: full(0), kids: []*box{{kind: "iloc", body: make([]byte, 8)}}})
	at := f.spans[f.movie]
	source = slices.Concat(source[:at.at], written(t, f.moov), source[at.end():])
	c, err := Read(bytes.NewReader(source), int64(len(source)))
	if err != nil {
		t.Fatal(err)
	}
	target := &memory{load(t, made(t, "b.m4a", "-map", "0", "-c:a", "aac", "-fflags", "+bitexact"))}
	if err := c.Into(target, int64(len(target.b))); err != nil {
		t.Fatal(err)
	}
	if out, err := open(target, int64(len(target.b))); err != nil || out.moov.child("meta") != nil || out.moov.child("udta", "meta", "ilst") == nil {
		t.Errorf("%v", err)
	}
}
