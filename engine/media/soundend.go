package media

import (
	"bytes"
	"io"

	"evenshelf/engine/tags/id3"
)

// A decoder takes tags and zeros behind the sound for damaged sound, so they are cut off first.

const (
	tailBytes = id3.MaxZeros + (16 << 10) // read at once: the zeros and some of the longest MPEG frames

	// keepZeros zeros at the end of a FLAC are left alone: the checksum that ends its last frame may end in
	// zeros itself. FFmpeg passes over fewer bytes than the smallest frame has, which is 10.
	keepZeros = 9
)

// soundEnd returns where the sound of a FLAC or of MPEG audio ends that begins at offset start of a file of so
// many bytes: in front of all tags and zeros that follow its last frame.
func soundEnd(r io.ReaderAt, start, size int64, mpeg bool) (int64, error) {
	end, err := id3.TailStart(r, start, size)
	if err != nil {
		return 0, err
	}
	at := max(start, end-tailBytes)
	tail, err := readAt(r, at, int(max(0, end-at)))
	if err != nil {
		return 0, err
	}
	full := len(bytes.TrimRight(tail, "\x00"))
	switch {
	case full == 0 || len(tail)-full > id3.MaxZeros:
		return end, nil
	case mpeg:
		return at + int64(lastFrameEnd(tail, full, at == start)), nil
	default:
		return at + int64(min(len(tail), full+keepZeros)), nil
	}
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
