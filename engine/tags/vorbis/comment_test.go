package vorbis

import (
	"bytes"
	"errors"
	"reflect"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/tags"
)

// Two entries, put down byte by byte from Vorbis I, 5.2.1: lengths are 32 bits, low byte first; the framing bit follows.
const twoEntries = "\x06\x00\x00\x00vendor" + "\x02\x00\x00\x00" + "\x07\x00\x00\x00TITLE=T" + "\x03\x00\x00\x00a=\xff" + "\x01"

func TestParse(t *testing.T) {
	c, err := Parse([]byte(twoEntries))
	if want := (Comment{"vendor", []string{"TITLE=T", "a=\xff"}, []byte{1}}); err != nil || !reflect.DeepEqual(c, want) {
		t.Errorf("%+v, %v", c, err)
	}
	if got := string(c.Bytes()); got != twoEntries {
		t.Errorf("%q", got)
	}
}

// Of damaged blocks the entries in front of the damage are read.
func TestDamaged(t *testing.T) {
	for b, want := range map[string][]string{
		"": nil, "\x00\x00": nil, "\x09\x00\x00\x00vendor": nil, twoEntries[:12]: nil, twoEntries[:len(twoEntries)-3]: {"TITLE=T"},
		"\x00\x00\x00\x00" + "\xff\xff\xff\xff" + "\x03\x00\x00\x00a=b" + "\xff\xff\xff\xff": {"a=b"},
	} {
		if c, err := Parse([]byte(b)); !errors.Is(err, ErrDamaged) || !slices.Equal(c.Entries, want) {
			t.Errorf("%q: %q, %v", b, c.Entries, err)
		}
	}
}

func TestEdit(t *testing.T) {
	c := Comment{Vendor: "v", Entries: []string{"GAIN", "a=1", "replaygain_Track_Gain=2=3", "=GAIN", "A=4", "Gain "}}
	Edit{Drop: tags.IsGain, Add: [][2]string{{"X", "y"}}}.Apply(&c)
	if want := []string{"GAIN", "a=1", "=GAIN", "A=4", "Gain ", "X=y"}; c.Vendor != "v" || !slices.Equal(c.Entries, want) {
		t.Errorf("%q", c)
	}
}

// What was read is written as it was, but for damage, and an edit that was made once has nothing left to do.
func FuzzComment(f *testing.F) {
	f.Add([]byte(twoEntries))
	f.Add([]byte(strings.Replace(twoEntries, "TITLE", "XGAIN", 1)))
	f.Add([]byte("\x00\x00\x00\x00\xff\xff\xff\xff\x00\x00\x00\x00"))
	f.Fuzz(func(t *testing.T, b []byte) {
		c, err := Parse(b)
		if err == nil && !bytes.Equal(c.Bytes(), b) {
			t.Fatalf("%q became %q", b, c.Bytes())
		}
		edit := Edit{Drop: tags.Stale, Add: [][2]string{{"REPLAYGAIN_TRACK_GAIN", "1"}}}
		edit.Apply(&c)
		once := c.Bytes()
		if c, err = Parse(once); err != nil {
			t.Fatalf("%q: %v", once, err)
		}
		edit.Apply(&c)
		if !bytes.Equal(c.Bytes(), once) {
			t.Fatalf("%q became %q", once, c.Bytes())
		}
	})
}
