package media

import (
	"context"
	"fmt"
	"io"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// FuzzWAV feeds the reader arbitrary bytes (see fuzzPCM).
func FuzzWAV(f *testing.F) {
	f.Add(riffFile(plainFmt(1, 1, 8000, 16, 2), riffChunk("data", "\x01\x00\x02\x00")))
	f.Add(riffFile(riffChunk("odd ", "abc"), extFmt(1, 2, 48000, 3, 24, 3), riffChunk("data", "abcdefghijkl")))
	f.Add([]byte("RF64\xFF\xFF\xFF\xFFWAVE" + riffChunk("ds64", u64(80)+u64(8)+u64(4)+u32(0)) + plainFmt(3, 1, 8000, 32, 4) + "data\xFF\xFF\xFF\xFF12345678"))
	f.Add(riffFile(riffChunk("bext", strings.Repeat("B", 610)), riffChunk("data", "1234"), plainFmt(1, 1, 8000, 16, 2), riffChunk("axml", "<a>"), riffChunk("cart", "c")))
	f.Add(riffFile(riffChunk("LIST", "INFO"+riffChunk("INAM", "T")), plainFmt(1, 1, 8000, 16, 2), riffChunk("data", "1234"), riffChunk("cue ", u32(1)+u32(1)+u32(0)+"data"+u64(0)+u32(1)),
		riffChunk("LIST", "adtl"+riffChunk("labl", u32(1)+"L")+riffChunk("ltxt", u32(1)+u32(1))), riffChunk("id3 ", "ID3\x04\x00\x00\x00\x00\x00\x0CTALB\x00\x00\x00\x02\x00\x00\x00A")))
	f.Fuzz(func(t *testing.T, file []byte) { fuzzPCM(t, "f.wav", file) })
}

// FuzzAIFF feeds the reader arbitrary bytes, as FuzzWAV does.
func FuzzAIFF(f *testing.F) {
	f.Add(formFile("AIFF", comm(1, 2, 16, ""), ssnd("\x00\x01\x00\x02")))
	f.Add(formFile("AIFC", iffChunk("FVER", "\xA2\x80\x51\x40"), iffChunk("ANNO", "odd"), comm(2, 2, 24, "sowt"), ssnd("abcdefghijkl")))
	f.Add(formFile("AIFC", ssnd("12345678"), comm(1, 2, 32, "fl32")))
	f.Add(formFile("AIFF", comm(1, 2, 16, ""), iffChunk("MARK", b16(1)+b16(1)+b32(1)+"\x01m"), iffChunk("COMT", b16(1)+b32(0)+b16(0)+b16(1)+"c\x00"), iffChunk("NAME", "T"), ssnd("1234")))
	f.Fuzz(func(t *testing.T, file []byte) { fuzzPCM(t, "f.aiff", file) })
}

// fuzzPCM reads a file that may hold anything. That must neither panic nor deliver more than the file can hold, the
// sound must not depend on how it is asked for, and what is carried from it must be within it.
func fuzzPCM(t *testing.T, name string, file []byte) {
	if len(file) > 1<<16 {
		return
	}
	path := save(t, name, file)
	read := func(block int) (audio.Block, error) {
		r, err := withoutFFmpeg().Open(context.Background(), path)
		if err != nil {
			return nil, err
		}
		defer r.Close()
		if n := r.Format().Layout.Channels; n < 1 || n > maxChannels {
			t.Fatalf("%d channels", n)
		}
		return drain(r, block)
	}
	a, err1 := read(4096)
	b, err2 := read(5)
	if fmt.Sprint(err1) != fmt.Sprint(err2) {
		t.Fatalf("in large blocks %v, in small ones %v", err1, err2)
	}
	if a.Frames()*len(a) > len(file) {
		t.Fatalf("%d samples out of %d bytes", a.Frames()*len(a), len(file))
	}
	if a != nil {
		sameSound(t, b, a)
	}
	tags, err := openTags(path)
	if err != nil {
		return
	}
	defer tags.close()
	if s, _ := tags.sheet(); len(s.Fields)+len(s.Chapters) > len(file) {
		t.Fatalf("%d fields and %d chapters in %d bytes", len(s.Fields), len(s.Chapters), len(file))
	}
	before, after := tags.chunks(Spec{Container: tags.kind.container})
	for _, c := range append(before, after...) {
		if c.start < 12 || c.len < 0 || c.start+c.len > int64(len(file)) {
			t.Fatalf("chunk %+v in %d bytes", c, len(file))
		}
		body, length, err := tags.body(c, Spec{BitDepth: 16, History: "x"})
		if err != nil {
			t.Fatal(err)
		}
		if n, err := io.Copy(io.Discard, body); n != length || err != nil {
			t.Fatalf("chunk %+v: %d bytes of %d, %v", c, n, length, err)
		}
	}
}
