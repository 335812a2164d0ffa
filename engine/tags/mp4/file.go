package mp4

import (
	"fmt"
	"io"
	"slices"
)

// span is a box of the file itself, where it lies.
type span struct {
	kind    string // "" for a few bytes at the end that are no box
	at, len int64  // bytes, with its head
}

func (s span) end() int64 { return s.at + s.len }

// file is the boxes a file consists of, and its movie box in memory.
type file struct {
	r     io.ReaderAt
	size  int64
	spans []span
	torn  bool // the last box is longer than the file
	moov  *box
	movie int // which of the spans it is
}

// open reads the outline of a file and its movie box.
func open(r io.ReaderAt, size int64) (*file, error) {
	f := &file{r: r, size: size, movie: -1}
	for at := int64(0); at < size; {
		s, err := f.spanAt(at)
		if err != nil {
			return nil, err
		}
		if len(f.spans) == maxTop {
			return nil, damage("there are more boxes than in any recording")
		}
		if s.kind == "moov" && !f.torn {
			if f.movie >= 0 {
				return nil, damage("there are two movie boxes")
			}
			f.movie = len(f.spans)
		}
		f.spans = append(f.spans, s)
		at = s.end()
	}
	if f.movie < 0 {
		return nil, damage("there is no movie box")
	}
	var err error
	if f.moov, err = f.load(f.spans[f.movie], maxMovie); err != nil {
		return nil, err
	}
	if f.moov.child("cmov") != nil {
		return nil, fmt.Errorf("its movie box is compressed, which is not read here")
	}
	return f, nil
}

// spanAt reads the head of the box at an offset.
func (f *file) spanAt(at int64) (span, error) {
	var head [largeHead]byte
	n := int(min(largeHead, f.size-at))
	if _, err := f.r.ReadAt(head[:n], at); err != nil && err != io.EOF {
		return span{}, err
	}
	if n < boxHead {
		return span{at: at, len: int64(n)}, nil
	}
	s := span{kind: string(head[4:8]), at: at, len: int64(be32(head[:]))}
	least := int64(boxHead)
	switch s.len {
	case 0:
		s.len = f.size - at
	case 1:
		least = largeHead
		s.len = int64(min(be64(head[8:]), 1<<62))
	}
	if s.len > f.size-at || n < int(least) {
		f.torn, s.len = true, f.size-at
	} else if s.len < least {
		return s, damage("box %q at byte %d has %d bytes", s.kind, at, s.len)
	}
	return s, nil
}

// load reads a box into memory.
func (f *file) load(s span, limit int64) (*box, error) {
	if s.len > limit {
		return nil, damage("box %q has %d bytes", s.kind, s.len)
	}
	b := make([]byte, s.len)
	if _, err := io.ReadFull(io.NewSectionReader(f.r, s.at, s.len), b); err != nil {
		return nil, err
	}
	if be32(b) == 0 { // to the end of the file
		copy(b, put32(nil, uint32(s.len)))
	}
	left := maxBoxes
	list, rest, err := parse(b, 0, &left)
	if err == nil && (len(list) != 1 || len(rest) != 0) {
		err = damage("box %q is not one", s.kind)
	}
	if err != nil {
		return nil, err
	}
	return list[0], nil
}

// holdsSound reports whether a box of the file is one that the movie box's tables point into.
func (s span) holdsSound() bool { return s.kind == "mdat" || s.kind == "moof" }

// front reports whether the movie box stands in front of the sound, so that playing can begin before all has arrived.
func (f *file) front() bool {
	return slices.ContainsFunc(f.spans[f.movie:], span.holdsSound)
}

// track returns the first track of a kind ("soun"), or nil.
func (f *file) track(handler string) *box {
	for _, t := range f.moov.all("trak") {
		if handlerOf(t.child("mdia")) == handler {
			return t
		}
	}
	return nil
}

// handlerOf returns what a box that has a handler (mdia, meta) is about, or "".
func handlerOf(x *box) string {
	if h := x.child("hdlr"); h != nil && len(h.body) >= 12 {
		return string(h.body[8:12])
	}
	return ""
}
