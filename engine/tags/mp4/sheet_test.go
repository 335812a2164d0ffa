package mp4

import (
	"bytes"
	"encoding/json"
	"fmt"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"evenshelf/engine/tags"
)

// dressed puts a sheet into a file as FFmpeg wrote it.
func dressed(t testing.TB, level []byte, s tags.Sheet) []byte {
	t.Helper()
	m := &memory{bytes.Clone(level)}
	if err := WriteSheet(m, int64(len(level)), s); err != nil {
		t.Fatal(err)
	}
	return m.b
}

func sheetOf(b []byte) (tags.Sheet, error) { return ReadSheet(bytes.NewReader(b), int64(len(b))) }

func plain(t testing.TB) []byte {
	return load(t, made(t, "plain.m4a", "-map", "0:a", "-c:a", "aac", "-fflags", "+bitexact", "-movie_timescale", "44100"))
}

// chaptersBy is what ffprobe reads where a kind of box is hidden from it.
func chaptersBy(t *testing.T, b []byte, hidden string) (list []string) {
	t.Helper()
	path := filepath.Join(t.TempDir(), "x.m4a")
	save(t, path, bytes.ReplaceAll(b, []byte(hidden), []byte("skip")))
	var said struct {
		Chapters []struct {
			Start string            `json:"start_time"`
			Tags  map[string]string `json:"tags"`
		}
	}
	if err := json.Unmarshal([]byte(run(t, "ffprobe", "-v", "error", "-of", "json", "-show_chapters", path)), &said); err != nil {
		t.Fatal(err)
	}
	for _, ch := range said.Chapters {
		list = append(list, ch.Start+" "+ch.Tags["title"])
	}
	return list
}

// Both kinds of chapters say the same by the word of ffprobe and of our own reader, also where the first begins late and
// where there are more than the list has room for.
func TestChapters(t *testing.T) {
	t.Parallel()
	level := plain(t)
	many := tags.Sheet{}
	for i := range 300 {
		many.Chapters = append(many.Chapters, tags.Chapter{Start: time.Duration(i+1) * 9 * time.Millisecond, Title: fmt.Sprint("Ä", i)})
	}
	for name, s := range map[string]tags.Sheet{
		"usual": {Chapters: []tags.Chapter{{Start: 0, Title: "One"}, {Start: 1234 * time.Millisecond, Title: strings.Repeat("ä", 200)}}},
		"late":  {Chapters: []tags.Chapter{{Start: 500 * time.Millisecond, Title: "One"}, {Start: 1777770 * time.Microsecond}}},
		"many":  many,
	} {
		b := dressed(t, level, s)
		var want []string
		for _, ch := range s.Chapters {
			want = append(want, fmt.Sprintf("%.6f %s", ch.Start.Seconds(), ch.Title))
		}
		if got := chaptersBy(t, b, "chpl"); !slices.Equal(got, want) {
			t.Errorf("%s: the track has %q\nwant %q", name, got, want)
		}
		if name == "usual" {
			want[1] = want[1][:len("1.234000 ")+2*127]
		}
		if got := chaptersBy(t, b, "tref"); !slices.Equal(got, want[:min(255, len(want))]) {
			t.Errorf("%s: the list has %q\nwant %q", name, got, want)
		}
		for _, hidden := range []string{"chpl", "tref"} {
			got, err := sheetOf(bytes.ReplaceAll(b, []byte(hidden), []byte("skip")))
			for i, ch := range got.Chapters {
				if ch.Start != s.Chapters[i].Start || !strings.HasPrefix(s.Chapters[i].Title, ch.Title) {
					t.Errorf("%s: %+v, want %+v", name, ch, s.Chapters[i])
				}
			}
			if err != nil || len(got.Chapters) != len(want) && hidden == "chpl" {
				t.Errorf("%s: %d chapters, %v", name, len(got.Chapters), err)
			}
		}
	}
}

// A sheet that was written reads as it was, as far as MP4 has words for it, and FFmpeg decodes the sound as before.
func TestSheetRoundTrip(t *testing.T) {
	t.Parallel()
	level := plain(t)
	var names []string
	for _, x := range texts {
		names = append(names, x[1])
	}
	names = append(names, "MUSICBRAINZ_ALBUMID", "ISRC", "X OWN", "LANGUAGE", "BPM", "COMPILATION", "TRACKNUMBER", "DISCTOTAL")
	numeric := []string{"BPM", "COMPILATION", "TRACKNUMBER", "DISCTOTAL"}
	rapid.Check(t, func(t *rapid.T) {
		s := tags.Sheet{}
		text := rapid.StringN(1, 20, 80).Filter(func(v string) bool { return !strings.Contains(v, "\x00") })
		for _, name := range rapid.SliceOfDistinct(rapid.SampledFrom(names), rapid.ID[string]).Draw(t, "names") {
			f := tags.Field{Name: name, Values: rapid.SliceOfN(text, 1, 3).Draw(t, "values")}
			if slices.Contains(numeric, name) && rapid.Bool().Draw(t, "whole") {
				f.Values = []string{fmt.Sprint(rapid.IntRange(1, 99_999).Draw(t, "number"))}
			}
			s.Fields = append(s.Fields, f)
		}
		for n := range rapid.IntRange(0, 3).Draw(t, "pictures") {
			data := append([]byte("\xFF\xD8\xFF"), rapid.SliceOf(rapid.Byte()).Draw(t, "data")...)
			s.Pictures = append(s.Pictures, tags.Picture{Kind: tags.FrontCover * max(0, 1-n), MIME: "image/jpeg", Data: data})
		}
		m := &memory{bytes.Clone(level)}
		if err := WriteSheet(m, int64(len(level)), s); err != nil {
			t.Fatal(err)
		}
		got, err := sheetOf(m.b)
		if len(s.Fields)+len(s.Pictures) > 0 && err != nil {
			t.Fatal(err)
		}
		byName := func(list []tags.Field) map[string][]string {
			all := map[string][]string{}
			for _, f := range list {
				all[f.Name] = f.Values
			}
			return all
		}
		if want := byName(s.Fields); !reflect.DeepEqual(byName(got.Fields), want) || !reflect.DeepEqual(got.Pictures, s.Pictures) {
			t.Fatalf("\n%+v\n%+v", got, s)
		}
	})
	path, again := filepath.Join(t.TempDir(), "a.m4a"), filepath.Join(t.TempDir(), "b.m4a")
	save(t, path, level)
	save(t, again, dressed(t, level, tags.Sheet{Fields: []tags.Field{{Name: "TITLE", Values: []string{"T"}}}, Chapters: []tags.Chapter{{Title: "C"}}}))
	sound := func(path string) string {
		return run(t, "ffmpeg", "-v", "error", "-i", path, "-map", "0:a", "-f", "md5", "-")
	}
	if sound(path) != sound(again) {
		t.Error("the sound is another")
	}
}

// Numbers of genres are from ID3v1, from 1 on: 18 is Rock. Texts may be UTF-16, which a big tag of QuickTime is.
func TestOldItems(t *testing.T) {
	s := tags.Sheet{}
	readItem(&s, &box{kind: "gnre", body: boxRow("data", "\x00\x00\x00\x00\x00\x00\x00\x00\x00\x12")}, "")
	readItem(&s, &box{kind: "gnre", body: boxRow("data", "\x00\x00\x00\x00\x00\x00\x00\x00\xff\x12")}, "")
	readItem(&s, &box{kind: "\xA9nam", body: boxRow("data", "\x00\x00\x00\x02\x00\x00\x00\x00\xFF\xFEL\x00\xE4\x00")}, "")
	readItem(&s, &box{kind: "----", body: boxRow("data", "\x00\x00\x00\x00\x00\x00\x00\x00\xFF\x00")}, "x")
	if want := []tags.Field{{Name: "GENRE", Values: []string{"Rock"}}, {Name: "TITLE", Values: []string{"Lä"}}}; !reflect.DeepEqual(s.Fields, want) {
		t.Errorf("%q", s.Fields)
	}
}

// Whatever the bytes are, a sheet is read within bounds, and it can be written.
func FuzzSheet(f *testing.F) {
	level := load(f, made(f, "plain.m4a", "-map", "0:a", "-t", "0.1", "-c:a", "aac", "-fflags", "+bitexact"))
	full := tags.Sheet{
		Fields:   []tags.Field{{Name: "TITLE", Values: []string{"T", "U"}}, {Name: "X", Values: []string{"y"}}, {Name: "TRACKNUMBER", Values: []string{"3"}}},
		Pictures: []tags.Picture{{Data: []byte("\xFF\xD8\xFFx")}}, Chapters: []tags.Chapter{{Start: 10, Title: "C"}, {Start: time.Second, Title: "D"}},
	}
	for _, s := range []tags.Sheet{full, {Chapters: full.Chapters}} {
		b := dressed(f, level, s)
		f.Add(b)
		f.Add(bytes.ReplaceAll(b, []byte(chapterBox), []byte("skip")))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		s, err := sheetOf(data)
		if err != nil {
			return
		}
		size := 0
		for _, p := range s.Pictures {
			size += len(p.Data)
		}
		if size > len(data) || len(s.Chapters) > maxChapters {
			t.Fatalf("%d bytes of pictures, %d chapters", size, len(s.Chapters))
		}
		s.Settle()
		inItems := func(f tags.Field) bool { return !isLanguage(f) } // the language is the track's
		if _, err := sheetOf(dressed(t, level, s)); err != nil && slices.ContainsFunc(s.Fields, inItems) {
			t.Fatal(err)
		}
	})
}
