package id3

import (
	"bytes"
	"encoding/binary"
	"slices"
)

// Flags of an ID3v2 header and of its frames' second byte of flags.
const (
	unsynchronised = 0x80 // in 2.4: that all frames are
	hasExtended    = 0x40 // in 2.2: compressed, in a way that was never defined
	hasFooter      = 0x10 // 2.4
	compressed3    = 0x80 // 2.3
	encrypted3     = 0x40
	grouped3       = 0x20
	grouped4       = 0x40 // 2.4
	compressed4    = 0x08
	encrypted4     = 0x04
	unsync4        = 0x02
	withLength4    = 0x01
)

// tag is an ID3v2 tag.
type tag struct {
	head    [headLen]byte
	frames  []frame
	padding int // zeros behind the frames
}

// frame is one frame as it lies in the file, header and all.
type frame struct {
	id  string // as in 2.3 and 2.4, also that of a 2.2 frame which has a counterpart there
	raw []byte
}

func (t *tag) version() byte { return t.head[3] }

// frameHead is how many bytes the header of a frame has.
func (t *tag) frameHead() int {
	if t.version() == 2 {
		return 6
	}
	return 10
}

// parse reads a whole tag. It is not ok if its version or the way it is written is not known.
func parse(b []byte) (t *tag, ok bool) {
	t = &tag{}
	if copy(t.head[:], b) < headLen || t.version() < 2 || t.version() > 4 || t.version() == 2 && t.head[5]&hasExtended != 0 {
		return nil, false
	}
	body := b[headLen:]
	if t.head[5]&hasFooter != 0 {
		body = body[:max(0, len(body)-headLen)]
	}
	if t.version() < 4 && t.head[5]&unsynchronised != 0 {
		body = resynchronised(body)
	}
	if t.version() > 2 && t.head[5]&hasExtended != 0 {
		n, ok := t.extended(body)
		if !ok {
			return nil, false
		}
		body = body[n:]
	}
	var rest []byte
	t.frames, rest = walk(body, t.frameHead(), t.sizeOf)
	if t.version() == 4 {
		// A widespread program wrote the sizes of 2.3 into tags of 2.4.
		if other, left := walk(body, 10, plain); !zeros(rest) && (zeros(left) || len(left) < len(rest)) {
			for i, f := range other {
				other[i].raw = slices.Clone(f.raw)
				putSyncsafe(other[i].raw[4:], len(f.raw)-10)
			}
			t.frames, rest = other, left
		}
	}
	if zeros(rest) {
		t.padding = len(rest)
	}
	return t, true
}

// extended returns the length of the extended header; careless writers set the flag and have none.
func (t *tag) extended(b []byte) (n int, ok bool) {
	switch {
	case len(b) < 4:
		return 0, false
	case isID(b[:4]):
		return 0, true
	case t.version() == 3: // the size does not count itself
		size := binary.BigEndian.Uint32(b)
		return int(size) + 4, uint64(size)+4 <= uint64(len(b))
	}
	n, ok = syncsafe(b)
	return n, ok && n >= 4 && n <= len(b)
}

// sizeOf reads the size in the header of a frame.
func (t *tag) sizeOf(b []byte) (int, bool) {
	switch t.version() {
	case 2:
		return int(b[3])<<16 | int(b[4])<<8 | int(b[5]), true
	case 3:
		return plain(b)
	}
	return syncsafe(b[4:])
}

func plain(b []byte) (int, bool) {
	n := binary.BigEndian.Uint32(b[4:])
	return int(n), n < MaxLength
}

// walk cuts b into frames whose headers have so many bytes, as far as they go.
func walk(b []byte, head int, size func([]byte) (int, bool)) (list []frame, rest []byte) {
	name := 4
	if head == 6 {
		name = 3
	}
	for len(b) >= head && isID(b[:name]) {
		n, ok := size(b)
		if !ok || n > len(b)-head {
			break
		}
		list = append(list, frame{modern(b[:name]), b[:head+n]})
		b = b[head+n:]
	}
	return list, b
}

// isID reports whether b may be the name of a frame: capitals and digits. Some writers put the three letters of 2.2
// into later versions.
func isID(b []byte) bool {
	for i, c := range b {
		capital := c >= 'A' && c <= 'Z' || c >= '0' && c <= '9'
		if !capital && !(i == 3 && (c == 0 || c == ' ')) {
			return false
		}
	}
	return true
}

func zeros(b []byte) bool { return len(bytes.TrimRight(b, "\x00")) == 0 }

// resynchronised undoes unsynchronisation: a zero was put behind every 0xFF that could be taken for sound.
func resynchronised(b []byte) []byte { return bytes.ReplaceAll(b, []byte{0xFF, 0}, []byte{0xFF}) }

// unsynchronise does it.
func unsynchronise(b []byte) []byte {
	var out []byte
	for i, c := range b {
		out = append(out, c)
		if c == 0xFF && (i+1 == len(b) || b[i+1] >= 0xE0 || b[i+1] == 0) {
			out = append(out, 0)
		}
	}
	return out
}

// content returns what a frame holds, as it was before unsynchronisation, and how many bytes are in front of it. It is
// not ok if that cannot be read: it is compressed, encrypted or broken.
func (t *tag) content(f frame) (body []byte, at int, ok bool) {
	at = t.frameHead()
	if t.version() == 2 {
		return f.raw[at:], at, true
	}
	flags := f.raw[9]
	grouped, closed := flags&grouped4 != 0, flags&(compressed4|encrypted4) != 0
	if t.version() == 3 {
		grouped, closed = flags&grouped3 != 0, flags&(compressed3|encrypted3) != 0
	}
	if grouped {
		at++
	}
	if t.version() == 4 && flags&withLength4 != 0 {
		at += 4
	}
	if closed || at > len(f.raw) {
		return nil, 0, false
	}
	if body = f.raw[at:]; t.unsynced(f) {
		body = resynchronised(body)
	}
	return body, at, true
}

// unsynced reports whether a frame is unsynchronised by itself.
func (t *tag) unsynced(f frame) bool {
	return t.version() == 4 && (f.raw[9]&unsync4 != 0 || t.head[5]&unsynchronised != 0)
}

// with returns a frame with other content behind the same header, but for its size.
func (t *tag) with(f frame, at int, body []byte) frame {
	if t.unsynced(f) {
		body = unsynchronise(body)
	}
	f.raw = slices.Concat(f.raw[:at], body)
	t.putSize(f.raw)
	return f
}

func (t *tag) putSize(raw []byte) {
	switch n := len(raw) - t.frameHead(); t.version() {
	case 2:
		raw[3], raw[4], raw[5] = byte(n>>16), byte(n>>8), byte(n)
	case 3:
		binary.BigEndian.PutUint32(raw[4:], uint32(n))
	case 4:
		putSyncsafe(raw[4:], n)
	}
}

// text returns a TXXX frame of plain letters.
func (t *tag) text(name, value string) frame {
	id, head := "TXXX", make([]byte, t.frameHead())
	if t.version() == 2 {
		id = "TXX"
	}
	copy(head, id)
	raw := slices.Concat(head, []byte{0}, []byte(name), []byte{0}, []byte(value)) // 0: ISO 8859-1
	t.putSize(raw)
	return frame{"TXXX", raw}
}

// render returns the bytes of the tag.
func (t *tag) render() []byte {
	head, padding := t.head, t.padding
	if t.version() < 4 {
		head[5] &^= unsynchronised
	}
	head[5] &^= hasExtended
	if head[5]&hasFooter != 0 {
		padding = 0 // a tag has one or the other
	}
	out := head[:]
	for _, f := range t.frames {
		out = append(out, f.raw...)
	}
	padding = min(padding, MaxLength-1-(len(out)-headLen))
	out = append(out, make([]byte, max(0, padding))...)
	putSyncsafe(out[6:], len(out)-headLen)
	if head[5]&hasFooter != 0 {
		out = append(append(out, "3DI"...), out[3:headLen]...)
	}
	return out
}
