package media

import (
	"bufio"
	"io"
)

// ahead is how many bytes are read at once: enough that the cost of a call vanishes, few enough that they
// are still in the processor's cache when they are unpacked.
const ahead = 128 << 10

// blockStream turns interleaved frames of one encoding into planar blocks. It is the heart of every
// reader here; after it is made nothing is allocated. Frames are unpacked where they were read to.
type blockStream struct {
	r      *bufio.Reader
	unpack unpacker
	align  int   // bytes a frame
	left   int64 // frames still to come; math.MaxInt64 if only the end of r tells
}

func newBlockStream(r io.Reader, unpack unpacker, align int, frames int64) *blockStream {
	return &blockStream{r: bufio.NewReaderSize(r, max(ahead, align)), unpack: unpack, align: align, left: frames}
}

// read fills dst as far as the buffer reaches. It returns io.EOF with or after the last frame and
// io.ErrUnexpectedEOF if r ended before left frames had come.
func (s *blockStream) read(dst [][]float32) (n int, err error) {
	if s.left == 0 {
		return 0, io.EOF
	}
	if len(dst) == 0 || len(dst[0]) == 0 {
		return 0, nil
	}
	want := int(min(int64(len(dst[0])), int64(s.r.Size()/s.align), s.left))
	raw, err := s.r.Peek(want * s.align)
	n = len(raw) / s.align
	s.unpack(dst, raw, n)
	s.r.Discard(n * s.align) // cannot fail: so many bytes are there
	s.left -= int64(n)
	if err == io.EOF {
		err = io.ErrUnexpectedEOF
	}
	return n, err
}
