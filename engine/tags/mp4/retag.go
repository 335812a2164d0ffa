package mp4

import (
	"fmt"
	"io"
	"slices"

	"evenshelf/engine/tags"
)

// padding is the free space left behind a movie box that had to be moved, so that the next change of tags moves
// nothing.
const padding = 4 << 10

// Retag writes the file that src holds to dst with the gain items g instead of those it has: lower-case
// "replaygain_…" items of freeform names. Everything else stays byte for byte, but for offsets of what comes to lie
// elsewhere. Nothing does where the movie box is the last or free space takes up the difference.
func Retag(dst io.Writer, src *io.SectionReader, g tags.Gains) error {
	f, err := open(src, src.Size())
	if err != nil {
		return err
	}
	if last := f.spans[len(f.spans)-1]; f.torn {
		return damage("box %q at byte %d is longer than the file", last.kind, last.at)
	}
	if err := setGains(f.moov, g); err != nil {
		return err
	}
	room, err := f.room()
	if err != nil {
		return err
	}
	old := f.behind()
	m := move{from: old, by: f.spans[f.movie].at + f.moov.size() + room - old}
	if m.by != 0 {
		if err := f.move(m); err != nil {
			return err
		}
	}
	same := room == old-f.spans[f.movie].end()
	for i, s := range f.spans {
		switch {
		case i == f.movie:
			if err = f.moov.writeTo(dst); err == nil && room > 0 && !same {
				err = freeBox(room).writeTo(dst)
			}
		case i == f.movie+1 && s.end() <= old && !same: // the free space that has become room
		default:
			err = f.copy(dst, s, m)
		}
		if err != nil {
			return err
		}
	}
	return nil
}

// behind returns where the movie box ends, with free space that follows it if there is sound behind.
func (f *file) behind() int64 {
	if next := f.movie + 1; f.front() && f.spans[next].free() {
		return f.spans[next].end()
	}
	return f.spans[f.movie].end()
}

func (s span) free() bool { return s.kind == "free" || s.kind == "skip" }

// room decides how many bytes of free space follow the movie box: those that take up what it has grown or shrunk by.
// If there are free boxes inside it, one of these does instead. Where nothing suits, everything will have to move.
func (f *file) room() (int64, error) {
	old := f.behind() - f.spans[f.movie].end()
	if !f.front() {
		return 0, nil
	}
	grown := f.moov.size() - f.spans[f.movie].len
	if room := old - grown; grown == 0 || room == 0 || room >= boxHead && room <= maxOther {
		return room, nil
	}
	for _, holder := range []*box{f.moov.child("udta", "meta"), f.moov.child("udta"), f.moov} {
		for i, x := range holder.list() {
			left := x.size() - grown
			switch {
			case x.kind != "free" || x.large || left < boxHead && left != 0:
			case left == 0:
				holder.kids = slices.Delete(holder.kids, i, i+1)
				return old, nil
			default:
				*x = *freeBox(left)
				return old, nil
			}
		}
	}
	m := move{from: f.behind()}
	for grown := true; grown; {
		m.by = f.spans[f.movie].at + f.moov.size() + padding - m.from
		var err error
		if grown, err = m.makeRoom(f.moov); err != nil {
			return 0, err
		}
	}
	return padding, nil
}

func (x *box) list() []*box {
	if x == nil {
		return nil
	}
	return x.kids
}

func freeBox(n int64) *box { return &box{kind: "free", body: make([]byte, n-boxHead)} }

// move corrects what the movie box says about the places of what moves.
func (f *file) move(m move) error {
	if !f.front() {
		return nil
	}
	for i, s := range f.spans {
		switch {
		case s.kind == "sidx" && i < f.movie:
			return fmt.Errorf("its index (sidx) stands in front of its movie box, which has no room for the tags")
		case s.kind == "meta":
			x, err := f.load(s, maxOther)
			if err == nil {
				err = movable(x)
			}
			if err != nil {
				return err
			}
		}
	}
	return m.movie(f.moov)
}

// copy writes a box of the file as it is, or with the offsets in it corrected.
func (f *file) copy(dst io.Writer, s span, m move) error {
	var correct func(*box) error
	switch {
	case m.by == 0:
	case s.kind == "moof":
		correct = m.fragment
	case s.kind == "mfra":
		correct = m.index
	}
	if correct == nil {
		_, err := io.CopyN(dst, io.NewSectionReader(f.r, s.at, s.len), s.len)
		return err
	}
	x, err := f.load(s, maxOther)
	if err == nil {
		err = correct(x)
	}
	if err != nil {
		return err
	}
	return x.writeTo(dst)
}
