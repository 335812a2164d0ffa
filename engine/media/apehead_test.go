package media

import (
	"bytes"
	"slices"
	"testing"
)

// An APEv2 tag in front of the sound, with a picture in it that looks like sound, is passed over.
func TestAPEInFront(t *testing.T) {
	source := mp3Source(t, 0)
	file := load(t, source)
	file = file[:bytes.Index(file, []byte("APETAGEX"))]
	want, info := decode(t, withFFmpeg(t), save(t, "a.mp3", file))
	for _, size := range []int{100, 100_000, 500_000} {
		cover := bytes.Repeat([]byte("\xFF\xFB\x90\x00a picture"), size/13)
		item := slices.Concat([]byte(u32(int64(len(cover)))), []byte("\x02\x00\x00\x00Cover Art (Front)\x00"), cover)
		edge := func(flags int64) []byte {
			return []byte("APETAGEX" + u32(2000) + u32(int64(len(item)+32)) + u32(1) + u32(flags) + "\x00\x00\x00\x00\x00\x00\x00\x00")
		}
		path := save(t, "b.mp3", slices.Concat(edge(1<<31|1<<29), item, edge(1<<31), file))
		for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
			got, is := decode(t, box, path)
			if got.Frames() != want.Frames() || is.Frames != info.Frames || is.BitRate != info.BitRate {
				t.Errorf("%d bytes by %s: %d frames of %d, %+v", size, is.Decoder, got.Frames(), want.Frames(), is)
			}
		}
	}
}
