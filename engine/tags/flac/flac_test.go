package flac

import (
	"bytes"
	"io"
	"testing"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/vorbis"
)

// streamInfo is the example of RFC 9639, D.1.1 (from memory), but for its sum: 44.1 kHz, two channels, 16 bits, one
// sample, in blocks of 4096.
const streamInfo = "\x10\x00\x10\x00\x00\x00\x0f\x00\x00\x0f\x0a\xc4\x42\xf0\x00\x00\x00\x01" + "0123456789abcdef"

func block(head string, body string) string {
	return head + string([]byte{0, byte(len(body) >> 8), byte(len(body))}) + body
}

const comments = "\x01\x00\x00\x00v\x02\x00\x00\x00\x0f\x00\x00\x00REPLAYGAIN_X=1B\x03\x00\x00\x00a=b"

var gains = tags.Gains{Track: tags.Loudness{Integrated: -20, Peak: 0}}

func section(s string) *io.SectionReader {
	return io.NewSectionReader(bytes.NewReader([]byte(s)), 0, int64(len(s)))
}

func TestReadInfo(t *testing.T) {
	list, sound, err := Blocks(section("fLaC" + block("\x80", streamInfo) + "sound"))
	if err != nil || sound != First {
		t.Fatal(sound, err)
	}
	info, err := ReadInfo(list)
	if want := (Info{4096, 15, 44100, 2, 16, 1}); err != nil || info != want {
		t.Errorf("%+v, %v", info, err)
	}
}

// The gain goes, the rest stays, byte for byte: worked out by hand.
func TestRetag(t *testing.T) {
	before := "fLaC" + block("\x00", streamInfo) + block("\x63", "unknown") + block("\x84", comments) + "sound"
	after := "fLaC" + block("\x00", streamInfo) + block("\x63", "unknown") + block("\x84", "\x01\x00\x00\x00v\x03\x00\x00\x00\x03\x00\x00\x00a=b"+
		"\x1d\x00\x00\x00REPLAYGAIN_TRACK_GAIN=2.00 dB\x1e\x00\x00\x00REPLAYGAIN_TRACK_PEAK=1.000000") + "sound"
	var out bytes.Buffer
	if err := Retag(&out, section(before), gains); err != nil || out.String() != after {
		t.Errorf("%v\n%q\n%q", err, out.String(), after)
	}
}

func TestRetagRefuses(t *testing.T) {
	big := vorbis.Comment{Entries: []string{string(make([]byte, MaxBody-12))}}.Bytes()
	for name, file := range map[string]string{
		"no mark": "fLaX", "no STREAMINFO": "fLaC" + block("\x84", comments), "a short STREAMINFO": "fLaC" + block("\x80", streamInfo[1:]),
		"nothing": "", "no end": "fLaC" + block("\x00", streamInfo), "damaged comments": "fLaC" + block("\x00", streamInfo) + block("\x84", comments[:20]),
		"a cut block": "fLaC" + block("\x00", streamInfo) + "\x80\x00\x00\x09ab",
		"no room":     "fLaC" + block("\x00", streamInfo) + "\x84\xff\xff\xff" + string(big) + "sound",
	} {
		if err := Retag(io.Discard, section(file), gains); err == nil {
			t.Errorf("%s: no error", name)
		} else {
			t.Log(name, err)
		}
	}
}

// The checksum of RFC 9639, 9.1.8, worked out bit by bit as a division.
func TestHeaderChecksum(t *testing.T) {
	header := []byte{0xFF, 0xF8, 0x69, 0x18, 0x00, 0x00} // the frame header of RFC 9639, D.1 (from memory)
	rest := 0
	for _, x := range append(header, 0) {
		for bit := 7; bit >= 0; bit-- {
			if rest = rest<<1 | int(x>>bit&1); rest&0x100 != 0 {
				rest ^= 0x107
			}
		}
	}
	if got := crc8(header); int(got) != rest {
		t.Errorf("%#x, want %#x", got, rest)
	}
}

// Whatever a file holds: written anew it reads as the same, tagging it again changes nothing, its sound stays, and
// looking for frames in it ends.
func FuzzFLACBlocks(f *testing.F) {
	f.Add([]byte("fLaC" + block("\x00", streamInfo) + block("\x63", "unknown") + block("\x84", comments) + "sound"))
	f.Add([]byte("fLaC" + block("\x00", streamInfo) + block("\x04", comments) + block("\x84", comments)))
	f.Add([]byte("fLaC" + block("\x00", streamInfo) + "\x84\x00\x08\x00" + comments)) // cut
	f.Add([]byte("fLaC" + block("\x80", streamInfo) + "\xff\xf8\x69\x18\x00\x00\xbf\x03\x58\xfd\x03\x12\x8b\xaa\x9a"))
	f.Fuzz(func(t *testing.T, b []byte) {
		var once, twice bytes.Buffer
		list, sound, err := Blocks(bytes.NewReader(b))
		EditComments(list, vorbis.Edit{Drop: tags.Stale})
		Comments(list)
		if s := Sheet(list); len(Of(vorbis.FromSheet(s), s.Pictures)) != 1+len(s.Pictures) {
			t.Fatalf("a picture of %d is lost", len(s.Pictures))
		}
		if info, e := ReadInfo(list); e == nil {
			if _, e := MakeSeekTable(bytes.NewReader(b), min(sound, int64(len(b))), int64(len(b)), info); e != nil {
				t.Fatal(e)
			}
		}
		if e := Retag(&once, section(string(b)), gains); e != nil {
			return
		} else if err != nil {
			t.Fatal("was written although it is damaged: ", err)
		}
		if err := Retag(&twice, section(once.String()), gains); err != nil || !bytes.Equal(once.Bytes(), twice.Bytes()) {
			t.Fatalf("%v\n%q\n%q", err, once.String(), twice.String())
		}
		again, at, err := Blocks(bytes.NewReader(once.Bytes()))
		if err != nil || len(again) < len(list) || !bytes.Equal(once.Bytes()[at:], b[sound:]) {
			t.Fatalf("%d blocks of %d, %v", len(again), len(list), err)
		}
	})
}
