package mp4

import "encoding/binary"

// header is the beginning that mvhd, mdhd and tkhd have in common: version and flags, two times, and more
// (14496-12, 8.2.2, 8.3.2, 8.4.2). Version 1 has 64 bits for times and durations.
type header struct {
	x    *box
	wide int // bytes of a time or duration
}

// headerOf takes a box for a header; ok is false if it is too short or of another version.
func headerOf(x *box) (h header, ok bool) {
	if x == nil || len(x.body) < 4 || x.body[0] > 1 {
		return h, false
	}
	h = header{x, 4 + 4*int(x.body[0])}
	return h, len(x.body) >= 4+3*h.wide+8
}

// get and put read and write a time or duration of the header.
func (h header) get(at int) uint64 {
	if h.wide == 8 {
		return be64(h.x.body[at:])
	}
	return uint64(be32(h.x.body[at:]))
}

func (h header) put(at int, v uint64) {
	if h.wide == 8 {
		binary.BigEndian.PutUint64(h.x.body[at:], v)
	} else {
		binary.BigEndian.PutUint32(h.x.body[at:], uint32(v))
	}
}

// takeTimes takes over when something was made and last changed. What does not fit is left as it is.
func takeTimes(dst, src *box) {
	to, ok1 := headerOf(dst)
	from, ok2 := headerOf(src)
	for n := range 2 {
		if ok1 && ok2 && (to.wide == 8 || from.get(4+n*from.wide) < 1<<32) {
			to.put(4+n*to.wide, from.get(4+n*from.wide))
		}
	}
}

// duration is what mvhd and mdhd say of it.
type duration struct {
	scale  uint32 // units a second; 0 if not known
	length uint64
}

func durationOf(x *box) duration {
	h, ok := headerOf(x)
	if !ok {
		return duration{}
	}
	at := 4 + 2*h.wide
	return duration{be32(x.body[at:]), h.get(at + 4)}
}

// language returns the two bytes of a language in a media header (mdhd), or nil.
func language(mdhd *box) []byte {
	h, ok := headerOf(mdhd)
	if at := 8 + 3*h.wide; ok && len(mdhd.body) >= at+2 {
		return mdhd.body[at : at+2]
	}
	return nil
}
