package media

import (
	"bytes"
	"cmp"
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"slices"
	"unicode/utf8"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/id3"
)

// kind is what a file turned out to be.
type kind struct {
	container string // as in Info.Container
	demuxer   string // FFmpeg's name of the demuxer that is forced on it
	start     int64  // where the format's own bytes begin, after tags or junk
	end       int64  // where they end, in front of tags and zeros; 0 if that is where the file does
}

// section is what of the file the format's own bytes are in.
func (k kind) section(r io.ReaderAt) *io.SectionReader {
	return io.NewSectionReader(r, k.start, cmp.Or(k.end, math.MaxInt64)-k.start)
}

// magic is a run of bytes that gives a format away.
type magic struct {
	offset int
	bytes  string
	kind   kind
}

// Playlists and scripts have no entry and never get one: FFmpeg would follow what they point at.
var magics = []magic{
	{8, "WAVE", kind{container: "wav", demuxer: "wav"}}, // RIFF, RF64 or BW64; checked below
	{0, "fLaC", kind{container: "flac", demuxer: "flac"}},
	{0, "OggS", kind{container: "ogg", demuxer: "ogg"}},
	{4, "ftypqt  ", kind{container: "mov", demuxer: "mov"}},
	{4, "ftyp", kind{container: "mp4", demuxer: "mov"}},
	{4, "moov", kind{container: "mov", demuxer: "mov"}},
	{4, "mdat", kind{container: "mov", demuxer: "mov"}},
	{4, "wide", kind{container: "mov", demuxer: "mov"}},
	{0, "\x1A\x45\xDF\xA3", kind{container: "matroska", demuxer: "matroska"}},
	{8, "AIFF", kind{container: "aiff", demuxer: "aiff"}},
	{8, "AIFC", kind{container: "aiff", demuxer: "aiff"}},
	{8, "AVI ", kind{container: "avi", demuxer: "avi"}},
	{0, "\x30\x26\xB2\x75\x8E\x66\xCF\x11", kind{container: "asf", demuxer: "asf"}},
	{0, "riff\x2E\x91\xCF\x11", kind{container: "w64", demuxer: "w64"}},
	{0, "caff", kind{container: "caf", demuxer: "caf"}},
	{0, ".snd", kind{container: "au", demuxer: "au"}},
	{0, "wvpk", kind{container: "wv", demuxer: "wv"}},
	{0, "MAC ", kind{container: "ape", demuxer: "ape"}},
	{0, "#!AMR", kind{container: "amr", demuxer: "amr"}},
	{0, "FLV\x01", kind{container: "flv", demuxer: "flv"}},
	{0, "\x00\x00\x01\xBA", kind{container: "mpeg", demuxer: "mpeg"}},
	{0, "\x0B\x77", kind{container: "ac3", demuxer: "ac3"}}, // E-AC-3 has the same sync word; told apart below
}

// iffs are the container words that the entries at offset 8 need at offset 0.
var iffs = map[string][]string{
	"wav": {"RIFF", "RF64", "BW64"}, "avi": {"RIFF"}, "aiff": {"FORM"},
}

const (
	sniffBytes = 4096      // enough for every magic
	syncWindow = 128 << 10 // how far the first MPEG audio frame may hide behind junk
)

// sniff recognises a file by its content. Its error wraps ErrUnsupported or ErrEmpty, or is a read error.
func sniff(r io.ReaderAt) (kind, error) {
	head, err := readAt(r, 0, sniffBytes)
	if err != nil {
		return kind{}, err
	}
	if len(head) == 0 {
		return kind{}, ErrEmpty
	}
	var start int64
	for range 4 { // an ID3v2 or APEv2 tag may stand before MP3, AAC and even FLAC; careless taggers add another
		n := id3.HeadLength(head)
		if n == 0 {
			break
		}
		start += n
		if head, err = readAt(r, start, sniffBytes); err != nil {
			return kind{}, err
		}
	}
	if len(head) == 0 {
		return kind{}, &FormatError{start, "nothing follows its tag: the sound is missing"}
	}
	if k, ok := byMagic(head); ok {
		k.start = start
		return k, nil
	}
	if window, err := readAt(r, start, syncWindow); err != nil {
		return kind{}, err
	} else if k, ok := byFrames(window); ok {
		k.start += start
		return k, nil
	} else if freeFormat(window) {
		return kind{}, fmt.Errorf("%w: this is a free-format MP3, of a bit rate that its headers do not state; nothing here decodes it", ErrUnsupported)
	}
	return kind{}, fmt.Errorf("%w: this is %s", ErrUnsupported, describe(head))
}

func byMagic(head []byte) (kind, bool) {
	for _, m := range magics {
		if len(head) < m.offset+len(m.bytes) || string(head[m.offset:m.offset+len(m.bytes)]) != m.bytes {
			continue
		}
		k := m.kind
		switch k.container {
		case "wav", "avi", "aiff":
			if !slices.Contains(iffs[k.container], string(head[:4])) {
				continue
			}
		case "matroska":
			if bytes.Contains(head[:min(len(head), 64)], []byte("webm")) {
				k.container = "webm"
			}
		case "ac3": // byte 5 holds the stream's version: 11 … 16 is E-AC-3 (ETSI TS 102 366, Annex E)
			if len(head) > 5 && head[5]>>3 > 10 {
				k.container, k.demuxer = "eac3", "eac3"
			}
		}
		return k, true
	}
	// MPEG transport streams have a sync byte every 188 bytes.
	if len(head) > 4*188 && head[0] == 0x47 && head[188] == 0x47 && head[2*188] == 0x47 && head[3*188] == 0x47 {
		return kind{container: "mpegts", demuxer: "mpegts"}, true
	}
	return kind{}, false
}

// byFrames looks for MPEG audio (MP1 to MP3) or AAC in ADTS frames. One header is eleven or twelve bits
// of ones and proves nothing: three in a row, each where the one before says, do. A file that begins
// with a frame need not be long enough for three.
func byFrames(b []byte) (kind, bool) {
	for i := 0; i+7 < len(b); i++ {
		if b[i] != 0xFF || b[i+1]&0xE0 != 0xE0 {
			continue
		}
		if chain(b[i:], i == 0, mpegLength) {
			return kind{container: "mp3", demuxer: "mp3", start: int64(i)}, true
		}
		if chain(b[i:], i == 0, adtsLength) {
			return kind{container: "aac", demuxer: "aac", start: int64(i)}, true
		}
	}
	return kind{}, false
}

// chain reports whether b holds three frames back to back, or, if short is allowed, ends before the third.
func chain(b []byte, short bool, length func([]byte) int) bool {
	for range 3 {
		if len(b) < 7 {
			return short
		}
		n := length(b)
		if n == 0 {
			return false
		}
		b = b[min(n, len(b)):]
	}
	return true
}

func mpegLength(b []byte) int { return parseMPEG(b).length }

// adtsLength returns the length of the ADTS frame that b begins with, or 0 (ISO/IEC 13818-7, 6.2).
func adtsLength(b []byte) int {
	if b[0] != 0xFF || b[1]&0xF6 != 0xF0 || b[2]>>2&15 > 12 {
		return 0
	}
	n := int(b[3]&3)<<11 | int(b[4])<<3 | int(b[5]>>5)
	if n < 8 {
		return 0
	}
	return n
}

// describe says in a few words what an unknown file seems to hold.
func describe(head []byte) string {
	switch {
	case len(bytes.Trim(head, "\x00")) == 0:
		return "not a recording: it holds only zeros"
	case bytes.HasPrefix(head, []byte("#EXTM3U")), bytes.HasPrefix(head, []byte("[playlist]")), bytes.HasPrefix(head, []byte("ffconcat")):
		return "a playlist, not a recording"
	case bytes.HasPrefix(head, []byte("PK\x03\x04")):
		return "an archive, not a recording"
	case bytes.HasPrefix(head, []byte("\x89PNG")), bytes.HasPrefix(head, []byte("\xFF\xD8\xFF")), bytes.HasPrefix(head, []byte("GIF8")):
		return "a picture, not a recording"
	case isText(head):
		return "text, not a recording"
	default:
		return "not a sound format that is known"
	}
}

func isText(b []byte) bool {
	for len(b) > 0 {
		r, n := utf8.DecodeRune(b)
		if r == utf8.RuneError && n == 1 && utf8.FullRune(b) || r < ' ' && r != '\n' && r != '\r' && r != '\t' {
			return false
		}
		b = b[n:]
	}
	return true
}

// le16 and friends keep header code short.
var (
	le16 = binary.LittleEndian.Uint16
	le32 = binary.LittleEndian.Uint32
	le64 = binary.LittleEndian.Uint64

	readAt = tags.ReadAt
)
