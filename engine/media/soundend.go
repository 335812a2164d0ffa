package media

import (
	"bytes"
	"io"
)

// Taggers append to a recording whatever they like, in any order, and some devices fill up its last cluster with
// zeros. A decoder takes that for damaged sound, so it is cut off first.

const (
	maxZeros  = 64 << 10              // no cluster is larger; more zeros are sound that never arrived
	tailBytes = maxZeros + (16 << 10) // read at once: the zeros and some of the longest MPEG frames
	maxTags   = 100

	// keepZeros zeros at the end of a FLAC are left alone: the checksum that ends its last frame may end in
	// zeros itself. FFmpeg passes over fewer bytes than the smallest frame has, which is 10.
	keepZeros = 9
)

// soundEnd returns where the sound of a FLAC or of MPEG audio ends that begins at offset start of a file of so
// many bytes: in front of all ID3v1, APEv2 and Lyrics3v2 tags and zeros that follow its last frame.
func soundEnd(r io.ReaderAt, start, size int64, mpeg bool) (int64, error) {
	end := size
	for range maxTags {
		at := max(start, end-tailBytes)
		tail, err := readAt(r, at, int(max(0, end-at)))
		if err != nil {
			return 0, err
		}
		full := len(bytes.TrimRight(tail, "\x00"))
		n := tagLength(tail, full)
		switch {
		case n > 0 && end-n >= start:
			end -= n
		case full == 0 || len(tail)-full > maxZeros:
			return end, nil
		case mpeg:
			return at + int64(lastFrameEnd(tail, full, at == start)), nil
		default:
			return at + int64(min(len(tail), full+keepZeros)), nil
		}
	}
	return end, nil
}

// tagLength returns how many bytes belong to the tag that b ends with, including zeros behind it, or 0. The
// last byte of b that is not zero is the one before full; a tag may itself end in zeros.
func tagLength(b []byte, full int) int64 {
	behind := func(magic string, size int) int { // the length of b from the last tag on of so many bytes, or 0
		if at := len(b) - size; at >= 0 && bytes.HasPrefix(b[at:], []byte(magic)) {
			return size
		}
		from := max(0, full-size)
		to := min(full, len(b)-size+len(magic)) // where the tag still fits
		if from >= to {
			return 0
		}
		at := bytes.Index(b[from:to], []byte(magic))
		if at < 0 {
			return 0
		}
		return len(b) - from - at
	}
	const footer = 32
	if n := behind("APETAGEX", footer); n > 0 {
		foot := b[len(b)-n:]
		size, flags := int64(le32(foot[12:])), le32(foot[20:]) // the size counts the footer but not the header
		if size < footer || flags&(1<<29) != 0 {               // that is a header
			return 0
		}
		if flags&(1<<31) != 0 {
			size += footer
		}
		return size + int64(n-footer)
	}
	const mark, digits = "LYRICS200", 6
	if text := b[:full]; full > len(mark)+digits && bytes.HasSuffix(text, []byte(mark)) {
		size := full - len(mark) - digits
		if n, ok := decimal(text[size : size+digits]); ok {
			return n + int64(digits+len(mark)+len(b)-full)
		}
	}
	if n := behind("TAG", 128); n > 0 { // last: these letters are in the other tags too
		return int64(n)
	}
	// More of the same, in front of it.
	return int64(behind("TAG+", 227))
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

// lastFrameEnd returns where the last MPEG frame in b ends. Zeros from full on may be part of it: an encoder
// fills up frames it has no use for. It is believed only if it ends a chain of three frames, each where the one
// before says, or of fewer if b is the whole of the sound. Without a chain it returns the length of b.
func lastFrameEnd(b []byte, full int, whole bool) int {
	for i := range full {
		n := 0
		at := i
		for h := parseMPEG(b[at:]); h.length > 0 && at < full; h = parseMPEG(b[min(at, len(b)):]) {
			at, n = at+h.length, n+1
		}
		if at >= full && (n >= 3 || whole && i == 0) {
			return min(at, len(b))
		}
	}
	return len(b)
}
