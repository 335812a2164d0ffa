package id3

import (
	"bytes"
	"encoding/binary"
	"io"
	"slices"

	"evenshelf/engine/tags"
)

// Taggers append to a recording whatever they like, in any order, and some devices fill up its last cluster with
// zeros.

const (
	// MaxZeros is how many zeros at the end of a file can be a device's: no cluster is larger.
	MaxZeros = 64 << 10
	window   = MaxZeros + (16 << 10) // read at once; no tag's mark of its length is longer than the rest
)

// TailStart returns where the tags begin that a file of so many bytes ends with, and zeros behind any of them;
// size if there are none. Nothing in front of offset start is looked at.
func TailStart(r io.ReaderAt, start, size int64) (int64, error) {
	end := size
	for range maxTags {
		at := max(start, end-window)
		b, err := tags.ReadAt(r, at, int(max(0, end-at)))
		if err != nil {
			return 0, err
		}
		m := lastTag(b)
		if m.length == 0 || end-m.length < start {
			break
		}
		end -= m.length
	}
	return end, nil
}

// mark is where the last tag of a file lies.
type mark struct {
	length   int64 // up to the end of the file; 0 if there is no tag
	zeros    int   // at the end of that, which are not the tag's
	editable bool  // it is one of those that rules are for
}

// lastTag looks for the tag that b ends with: at the very end first, for a tag may itself end in zeros, and then with
// zeros behind it.
func lastTag(b []byte) mark {
	full := len(bytes.TrimRight(b, "\x00"))
	begins := func(at int, magic string) bool { // "TAG" is in "APETAGEX", too
		return bytes.HasPrefix(b[at:], []byte(magic)) && !bytes.HasSuffix(b[:at], []byte("APE"))
	}
	m := tagAt(b, len(b), func(magic string, size int) (int, bool) {
		at := len(b) - size
		return at, at >= 0 && begins(at, magic)
	})
	if m.length > 0 || full == len(b) {
		return m
	}
	return tagAt(b, full, func(magic string, size int) (int, bool) {
		for at := max(0, full-size); at < full && at+size <= len(b); at++ {
			if begins(at, magic) {
				return at, true
			}
		}
		return 0, false
	})
}

// tagAt looks for a tag whose end find finds by its magic and size, or whose last letter is the one before end.
func tagAt(b []byte, end int, find func(magic string, size int) (at int, ok bool)) mark {
	if at, ok := find(apeMagic, apeLen); ok {
		size, flags := int64(binary.LittleEndian.Uint32(b[at+12:])), binary.LittleEndian.Uint32(b[at+20:]) // the size counts the footer but not the header
		if size < apeLen || flags&apeIsHeader != 0 {
			return mark{}
		}
		if flags&apeHeader != 0 {
			size += apeLen
		}
		zeros := len(b) - at - apeLen
		return mark{size + int64(zeros), zeros, true}
	}
	const magic, digits = "LYRICS200", 6
	if words := b[:end]; end > len(magic)+digits && bytes.HasSuffix(words, []byte(magic)) {
		size := end - len(magic) - digits
		if n, ok := decimal(words[size : size+digits]); ok {
			return mark{n + int64(len(b)-size), len(b) - end, false}
		}
	}
	if at, ok := find("3DI", headLen); ok { // the footer of an ID3v2.4 tag
		foot := b[at:]
		if size, ok := syncsafe(foot[6:]); ok && foot[3] == 4 && foot[5]&(hasFooter|15) == hasFooter {
			zeros := len(foot) - headLen
			return mark{int64(size + 2*headLen + zeros), zeros, true}
		}
	}
	for _, t := range []struct {
		magic string
		size  int
	}{{"TAG", 128}, {"TAG+", 227}} { // last: these letters are in the other tags too; and more of the same, in front of it
		if at, ok := find(t.magic, t.size); ok {
			return mark{int64(len(b) - at), len(b) - at - t.size, false}
		}
	}
	return mark{}
}

// decimal reads a number all of whose bytes are digits.
func decimal(b []byte) (n int64, ok bool) {
	for _, c := range b {
		if c < '0' || c > '9' {
			return 0, false
		}
		n = 10*n + int64(c-'0')
	}
	return n, true
}

// piece is a run of bytes behind the sound.
type piece struct {
	bytes    []byte
	tag      bool
	editable bool
}

// tailPieces cuts b, which ends with tags, into them and what is around them.
func tailPieces(b []byte) (list []piece) {
	for range maxTags {
		m := lastTag(b[max(0, len(b)-window):])
		if m.length == 0 || m.length > int64(len(b)) {
			break
		}
		at, end := len(b)-int(m.length), len(b)-m.zeros
		list = append(list, piece{bytes: b[end:]}, piece{b[at:end], true, m.editable})
		b = b[:at]
	}
	list = append(list, piece{bytes: b})
	slices.Reverse(list)
	return list
}
