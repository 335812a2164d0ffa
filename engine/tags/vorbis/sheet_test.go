package vorbis

import (
	"encoding/hex"
	"maps"
	"reflect"
	"slices"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"evenshelf/engine/tags"
)

// A PNG of one pixel in true colour: only its header is looked at (PNG, 11.2.2; its checksum is of any zip program).
const png = "\x89PNG\r\n\x1a\n\x00\x00\x00\x0dIHDR\x00\x00\x00\x01\x00\x00\x00\x01\x08\x02\x00\x00\x00\x90\x77\x53\xde"

// Worked by hand from the descriptions: comments by Vorbis I, 5, chapters by the habit of CHAPTERnnn, a picture by RFC
// 9639, 8.8.
func TestSheet(t *testing.T) {
	body := "\x00\x00\x00\x03\x00\x00\x00\x09image/png\x00\x00\x00\x01D\x00\x00\x00\x01\x00\x00\x00\x01\x00\x00\x00\x18\x00\x00\x00\x00\x00\x00\x00" + string(rune(len(png))) + png
	picture := tags.Picture{Kind: 3, MIME: "image/png", Description: "D", Data: []byte(png)}
	if got := string(PictureBytes(picture)); got != body {
		t.Errorf("%s\n%s", hex.Dump([]byte(got)), hex.Dump([]byte(body)))
	}
	c := Comment{}
	c.PutPictures([]tags.Picture{picture})
	c.Entries = append(c.Entries, "artist=One", "CHAPTER002=00:01:02.345", "Artist=Two", "no name", "METADATA_BLOCK_PICTURE=AAAA", "tracknumber=3/12", "TotalTracks=12",
		"CHAPTER002NAME=Second", "chapter001=01:00:00.5", "CHAPTER003=no time", "WAVEFORMATEXTENSIBLE_CHANNEL_MASK=0x3", "ALBUM=", "DISCNUMBER=1/x/y")
	want := tags.Sheet{
		Fields: []tags.Field{{Name: "ARTIST", Values: []string{"One", "Two"}}, {Name: "METADATA_BLOCK_PICTURE", Values: []string{"AAAA"}},
			{Name: "TRACKNUMBER", Values: []string{"3"}}, {Name: "TRACKTOTAL", Values: []string{"12"}}, {Name: "CHAPTER003", Values: []string{"no time"}},
			{Name: "DISCNUMBER", Values: []string{"1"}}, {Name: "DISCTOTAL", Values: []string{"x/y"}}},
		Pictures: []tags.Picture{picture},
		Chapters: []tags.Chapter{{Start: 62_345 * time.Millisecond, Title: "Second"}, {Start: time.Hour + 500*time.Millisecond}},
	}
	if got := c.Sheet(); !reflect.DeepEqual(got, want) {
		t.Errorf("\n%+v\n%+v", got, want)
	}
	if got := FromSheet(tags.Sheet{Fields: []tags.Field{{Name: "A=ÄB", Values: []string{"x", "y=z"}}}, Chapters: want.Chapters}).Entries; !slices.Equal(got,
		[]string{"A__B=x", "A__B=y=z", "CHAPTER001=00:01:02.345", "CHAPTER001NAME=Second", "CHAPTER002=01:00:00.500"}) {
		t.Errorf("%q", got)
	}
}

// What has no room is left out, and nothing behind it that has.
func TestFit(t *testing.T) {
	c := Comment{Vendor: "v", Entries: []string{"A=1", strings.Repeat("B=", 50), "C=2"}}
	c.Fit(40)
	if !slices.Equal(c.Entries, []string{"A=1", "C=2"}) || len(c.Bytes()) > 40 {
		t.Errorf("%q", c.Entries)
	}
}

// sheets draws what comments have words for.
func sheets(t *rapid.T) (s tags.Sheet) {
	text := rapid.StringN(1, 20, 80)
	for _, name := range rapid.SliceOfDistinct(rapid.StringMatching(`[A-Z][A-Z _]{0,9}[A-Z]`), rapid.ID[string]).Draw(t, "names") {
		if _, other := others[name]; !other && name != pictureName && !strings.HasPrefix(name, "CHAPTER") {
			s.Fields = append(s.Fields, tags.Field{Name: name, Values: rapid.SliceOfN(text, 1, 3).Draw(t, "values")})
		}
	}
	starts := map[int]bool{}
	for _, ms := range rapid.SliceOf(rapid.IntRange(0, 100_000_000)).Draw(t, "starts") {
		starts[ms] = true
	}
	for _, ms := range slices.Sorted(maps.Keys(starts)) {
		s.Chapters = append(s.Chapters, tags.Chapter{Start: time.Duration(ms) * time.Millisecond, Title: text.Draw(t, "title")})
	}
	for range rapid.IntRange(0, 3).Draw(t, "pictures") {
		data := rapid.SliceOfN(rapid.Byte(), 1, 99).Draw(t, "data")
		s.Pictures = append(s.Pictures, tags.Picture{Kind: rapid.IntRange(0, 20).Draw(t, "kind"), MIME: "image/jpeg", Description: text.Draw(t, "description"), Data: data})
	}
	return s
}

// A sheet that was written reads as it was.
func TestSheetRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := sheets(t)
		c := FromSheet(s)
		c.PutPictures(s.Pictures)
		c, err := Parse(c.Bytes())
		if got := c.Sheet(); err != nil || !reflect.DeepEqual(got, s) {
			t.Fatalf("%v\n%+v\n%+v", err, got, s)
		}
	})
}

// Whatever is in comments: a sheet of it, written and read, is the same.
func FuzzSheet(f *testing.F) {
	f.Add("ARTIST=One", "CHAPTER001=00:00:01.5", "CHAPTER001NAME=x")
	f.Add("METADATA_BLOCK_PICTURE=AAAAAwAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAAA=", "TRACKNUMBER=1/2", "=")
	f.Add("METADATA_BLOCK_PICTURE=AAAAA////w==", "chapter01=99:59:59", "CHAPTER01=1:1:1.1234567890")
	f.Fuzz(func(t *testing.T, a, b, c string) {
		once := Comment{Entries: []string{a, b, c}}.Sheet()
		if slices.ContainsFunc(once.Fields, func(f tags.Field) bool { return legal(f.Name) != f.Name }) {
			FromSheet(once) // has to rename what breaks the rules, so that it cannot be the same
			return
		}
		again := FromSheet(once)
		again.PutPictures(once.Pictures)
		twice := again.Sheet()
		if len(twice.Pictures) != len(once.Pictures) || len(twice.Chapters) != len(once.Chapters) {
			t.Fatalf("%+v\n%+v", once, twice)
		}
		for i, p := range once.Pictures {
			if !reflect.DeepEqual(p, twice.Pictures[i]) && len(p.Data) > 0 {
				t.Fatalf("%+v\n%+v", p, twice.Pictures[i])
			}
		}
	})
}
