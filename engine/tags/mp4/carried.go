package mp4

import (
	"bufio"
	"bytes"
	"io"
	"slices"
)

// Carried is what a levelled copy takes over from the file it is made from.
type Carried struct {
	from  *file
	sound *box // its first sound track, which is the one that is levelled
}

// Target is a file that is completed in place.
type Target interface {
	io.ReaderAt
	io.WriterAt
	Truncate(size int64) error
}

// Read looks at the file a copy is made from. It is read again when the copy is completed.
func Read(r io.ReaderAt, size int64) (*Carried, error) {
	f, err := open(r, size)
	if err != nil {
		return nil, err
	}
	c := &Carried{from: f, sound: f.track("soun")}
	if c.sound == nil {
		return nil, damage("there is no sound track")
	}
	level(f.moov)
	return c, nil
}

// Into completes a copy: a file with one sound track as FFmpeg writes it, ftyp, mdat, moov, in that order. It takes
// over, byte for byte, the boxes with metadata of the file, the movie and the sound track, chapters with their tracks,
// languages and times, but for what levelling has made untrue; and the movie box goes to the front if it was there.
func (c *Carried) Into(f Target, size int64) error {
	to, err := open(f, size)
	if err != nil {
		return err
	}
	sound, last := to.track("soun"), to.spans[len(to.spans)-1]
	if sound == nil || to.front() || last.kind != "moov" || to.spans[0].kind != "ftyp" {
		return errUnexpected
	}
	c.dress(to.moov, sound)
	tracks := c.tracks(to.moov, sound)
	if err := c.brand(f, to.spans[0]); err != nil {
		return err
	}
	others := c.others()
	if !c.from.front() {
		end, err := c.writeTracks(f, last.at, tracks)
		if err != nil {
			return err
		}
		return writeAll(f, end, append([]*box{to.moov}, others...))
	}
	first := to.spans[0].end()
	head := append(append([]*box{to.moov}, others...), freeBox(padding))
	m := move{from: first}
	for grown := true; grown; {
		m.by = total(head) + lengthOf(tracks)
		if grown, err = m.makeRoom(to.moov); err != nil {
			return err
		}
	}
	if err := m.movie(to.moov); err != nil {
		return err
	}
	if err := shift(f, first, last.at, m.by); err != nil {
		return err
	}
	if _, err := c.writeTracks(f, first+total(head), tracks); err != nil {
		return err
	}
	return writeHead(f, first, head)
}

// dress puts the metadata of the source into the movie of a copy.
func (c *Carried) dress(moov, sound *box) {
	from := c.from.moov
	takeTimes(moov.child("mvhd"), from.child("mvhd"))
	takeTimes(sound.child("tkhd"), c.sound.child("tkhd"))
	to, mdia := sound.child("mdia"), c.sound.child("mdia")
	takeTimes(to.child("mdhd"), mdia.child("mdhd"))
	copy(language(to.child("mdhd")), language(mdia.child("mdhd")))
	to.replace("hdlr", mdia.all("hdlr")...) // it has the track's name
	to.replace("elng", mdia.all("elng")...)
	for _, kind := range []string{"udta", "meta", "uuid"} {
		moov.replace(kind, unbound(from.all(kind))...)
		sound.replace(kind, unbound(c.sound.all(kind))...)
	}
}

// unbound returns those boxes that do not point into the file, as pictures in a meta box may.
func unbound(list []*box) []*box {
	return slices.DeleteFunc(list, func(x *box) bool { return movable(x) != nil })
}

// brand marks the copy of an audiobook as one: players remember the place in it.
func (c *Carried) brand(f Target, ftyp span) error {
	var major [4]byte
	if _, err := c.from.r.ReadAt(major[:], 8); err != nil || c.from.spans[0].kind != "ftyp" || string(major[:]) != "M4B " {
		return nil
	}
	b := make([]byte, min(ftyp.len, maxOther))
	if _, err := f.ReadAt(b, ftyp.at); err != nil {
		return err
	}
	_, err := f.WriteAt(bytes.ReplaceAll(b, []byte("M4A "), major[:]), ftyp.at)
	return err
}

// others returns the boxes of the source file that stand beside its movie box and are about the recording.
func (c *Carried) others() (list []*box) {
	size := int64(0)
	for _, s := range c.from.spans {
		if !slices.Contains([]string{"uuid", "meta", "udta"}, s.kind) || size+s.len > maxOther || len(list) == maxBeside {
			continue
		}
		if x, err := c.from.load(s, maxOther); err == nil {
			level(x)
			list, size = append(list, x), size+s.len
		}
	}
	return unbound(list)
}

// writeAll writes boxes at an offset and ends the file behind them.
func writeAll(f Target, at int64, list []*box) error {
	if err := writeHead(f, at, list); err != nil {
		return err
	}
	return f.Truncate(at + total(list))
}

func writeHead(f Target, at int64, list []*box) error {
	w := bufio.NewWriter(io.NewOffsetWriter(f, at))
	for _, x := range list {
		if err := x.writeTo(w); err != nil {
			return err
		}
	}
	return w.Flush()
}

// shift moves what lies from one offset to another to the end of the file, so many bytes further on.
func shift(f Target, from, to, by int64) error {
	if err := f.Truncate(to + by); err != nil {
		return err
	}
	buf := make([]byte, 1<<20)
	for to > from {
		n := min(int64(len(buf)), to-from)
		to -= n
		if _, err := f.ReadAt(buf[:n], to); err != nil {
			return err
		}
		if _, err := f.WriteAt(buf[:n], to+by); err != nil {
			return err
		}
	}
	return nil
}
