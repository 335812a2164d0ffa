package mp4

import (
	"bytes"
	"io"
	"slices"
	"testing"

	"evenshelf/engine/tags"
)

// items returns the items of all lists of a movie as bytes, but for those that are to go.
func items(t *testing.T, moov *box, gone func(kind, name string) bool) (list []string) {
	moov.each(func(meta *box) {
		if meta.kind == "meta" {
			name := namesOf(meta)
			for _, item := range meta.child("ilst").list() {
				if !gone(item.kind, name(item)) {
					list = append(list, string(written(t, item)))
				}
			}
		}
	})
	return list
}

func isGain(_, name string) bool { return tags.IsGain(name) }

// Whatever the bytes are: nothing is read outside of them, what is not edited stays, what is written reads back, and
// doing it again changes nothing.
func FuzzBoxes(f *testing.F) {
	short := []string{"-map", "0:a", "-t", "0.1", "-c:a", "aac"}
	level := load(f, made(f, "copy.m4a", append(short, "-fflags", "+bitexact")...))
	f.Add(level)
	f.Add(load(f, made(f, "front.m4a", append(short, "-movflags", "+faststart")...)))
	f.Add(load(f, made(f, "fragments.mp4", append(short, "-movflags", "empty_moov+frag_keyframe")...)))
	f.Add(load(f, made(f, "keys.mp4", append(short, "-movflags", "use_metadata_tags", "-metadata", "mood=calm")...)))
	if tagged, err := retag(load(f, made(f, "a.m4a", append(short, "-movflags", "+faststart")...)), gains); err == nil {
		f.Add(tagged)
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		size := int64(len(data))
		if e, ok := SoundExtent(bytes.NewReader(data), size); ok && (e.Start < 0 || e.Frames < 0 || e.Behind < 0) {
			t.Fatalf("%+v", e)
		}
		file, err := open(bytes.NewReader(data), size)
		if err != nil {
			return
		}
		if s := file.spans[file.movie]; be32(data[s.at:]) != 0 && !bytes.Equal(written(t, file.moov), data[s.at:s.end()]) {
			t.Fatal("the movie box does not come out as it went in")
		}
		if out, err := retag(data, gains); err == nil {
			again, err := open(bytes.NewReader(out), int64(len(out)))
			if err != nil || len(out) > len(data)+padding+8*len(data) {
				t.Fatalf("%d bytes of %d: %v", len(out), len(data), err)
			}
			if want, got := items(t, file.moov, isGain), items(t, again.moov, isGain); !slices.Equal(got, want) {
				t.Fatalf("items %q, want %q", got, want)
			}
			if twice, err := retag(out, gains); err != nil || !bytes.Equal(twice, out) {
				t.Fatalf("doing it again changes it: %v", err)
			}
		}
		c, err := Read(bytes.NewReader(data), size)
		if err != nil {
			return
		}
		want := items(t, &box{kids: c.from.moov.kids}, untrue)
		target := &memory{bytes.Clone(level)}
		if err := c.Into(target, int64(len(level))); err != nil {
			t.Fatal(err)
		}
		made, err := open(io.NewSectionReader(target, 0, int64(len(target.b))), int64(len(target.b)))
		if err != nil || made.torn || made.front() != c.from.front() {
			t.Fatalf("the copy is not in order: %v", err)
		}
		for _, item := range items(t, made.moov, untrue) {
			if !slices.Contains(want, item) {
				t.Fatalf("item %q came from nowhere", item)
			}
		}
		list, err := tables(made.moov)
		if err != nil || len(list) == 0 {
			t.Fatal(err)
		}
		at := bytes.Index(level, []byte("mdat")) + 4
		if place := list[0].get(0); !bytes.HasPrefix(target.b[place:], level[at:at+100]) {
			t.Fatal("the sound is not where its table says")
		}
	})
}
