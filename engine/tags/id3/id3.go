// Package id3 knows the tags of MPEG audio: ID3v2.2, 2.3 and 2.4 in front of the sound (or, with a footer, behind it), APEv2
// at either end, ID3v1 with its extensions and Lyrics3v2 behind it.
//
// A tag is a row of frames or items. They are kept byte for byte and in their order, whatever they hold; only those are
// taken out that a change of level makes wrong. A tag in which nothing changes keeps all its bytes. One in which something
// does is written anew in its own version: without unsynchronisation of the whole, extended header and CRC, which nobody
// needs any more, and without bytes that no reader gets to because what is in front of them is broken.
//
// Sources: the informal standards ID3v2.2.0, 2.3.0, 2.4.0 (structure, native frames) and its chapter addendum 1.0, and the
// public description of APEv2; from memory.
package id3

import (
	"encoding/binary"
)

const (
	// MaxLength is the most bytes of tags at one end of a file that are read: ID3v2's own limit for one tag.
	MaxLength = 1 << 28
	maxTags   = 100 // in a row; whoever has more has them from a machine gone mad

	headLen = 10 // bytes of an ID3v2 header, and of its footer
	apeLen  = 32 // bytes of an APEv2 header, and of its footer
)

// HeadLength returns the length of the ID3v2 or APEv2 tag that b, 32 bytes or more of a file, begins with, or 0.
func HeadLength(b []byte) int64 {
	switch {
	case len(b) >= headLen && string(b[:3]) == "ID3":
		n, ok := syncsafe(b[6:10])
		if !ok {
			return 0
		}
		if b[5]&hasFooter != 0 {
			n += headLen
		}
		return int64(n) + headLen
	case len(b) >= apeLen && string(b[:8]) == apeMagic && binary.LittleEndian.Uint32(b[20:])&apeIsHeader != 0:
		return apeLen + int64(binary.LittleEndian.Uint32(b[12:]))
	}
	return 0
}

// syncsafe reads a number of 4 × 7 bits.
func syncsafe(b []byte) (n int, ok bool) {
	for _, x := range b[:4] {
		n = n<<7 | int(x&0x7F)
		ok = x&0x80 == 0
		if !ok {
			break
		}
	}
	return n, ok
}

func putSyncsafe(b []byte, n int) {
	b[0], b[1], b[2], b[3] = byte(n>>21&0x7F), byte(n>>14&0x7F), byte(n>>7&0x7F), byte(n&0x7F)
}

// Levelled returns what a levelled copy carries of a recording's tags in front of its sound and behind it. Bytes at
// either end that are no tags, like zeros, are left out.
func Levelled(head, tail []byte) (front, back []byte) {
	for _, p := range headTags(head) {
		front = append(front, edited(p, levelled, nil)...)
	}
	for _, p := range tailPieces(tail) {
		switch {
		case p.editable:
			back = append(back, edited(p.bytes, levelled, nil)...)
		case p.tag:
			back = append(back, p.bytes...)
		}
	}
	return front, back
}

// headTags cuts b, which begins with tags, into them. What follows the last is left out.
func headTags(b []byte) (list [][]byte) {
	for range maxTags {
		n := HeadLength(b)
		if n == 0 || n > int64(len(b)) {
			break
		}
		list = append(list, b[:n])
		b = b[n:]
	}
	return list
}

// edited returns a tag of any kind after a rule, with these gains added; nil where nothing is left of it.
func edited(b []byte, r rule, gains [][2]string) []byte {
	if isID3(b) {
		if t, ok := parse(b); ok {
			return t.edited(b, r, gains)
		}
	} else if t, ok := parseAPE(b); ok {
		return t.edited(b, r, gains)
	}
	return b
}

// isID3 reports whether b is one whole ID3v2 tag.
func isID3(b []byte) bool { return len(b) > 0 && b[0] == 'I' && HeadLength(b) == int64(len(b)) }
