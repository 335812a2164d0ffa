package ogg

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"io"
)

// CheckChain refuses a chained file, one stream behind the end of another, whose links are not alike enough to be
// decoded as one sound: of another codec, or Opus with another output gain, which FFmpeg takes from the first link for
// all of them. Its error wraps ErrUnlike. Damage is no concern of it.
func CheckChain(r io.ReaderAt, size int64) error {
	begin, err := pageAt(r, 0)
	if err != nil {
		return nil
	}
	if end := lastPage(r, size); end == nil || end.serial() == begin.serial() {
		return nil // the usual file: one link
	}
	var link page                   // where the sound of the first link begins
	beginning, sound := true, false // of a link: streams side by side begin before any goes on; the first sound counts
	for at := int64(0); ; {
		p, err := pageAt(r, at)
		if err != nil {
			return nil
		}
		if p.has(first) && !beginning {
			sound = false
		}
		beginning = p.has(first)
		if _, ok := codecOf(p); ok && beginning && !sound {
			sound = true
			if link == nil {
				link = p
			} else if err := alike(link, p); err != nil {
				return fmt.Errorf("%w (the part from byte %d on)", err, at)
			}
		}
		at += int64(p.size())
	}
}

func alike(a, b page) error {
	one, _ := codecOf(a)
	other, _ := codecOf(b)
	switch {
	case one.name != other.name:
		return fmt.Errorf("%w: it is %s and goes on as %s", ErrUnlike, one.name, other.name)
	case one.name == "opus" && outputGain(a) != outputGain(b):
		return fmt.Errorf("%w: its output gain is %.2f dB and goes on as %.2f dB", ErrUnlike, outputGain(a), outputGain(b))
	}
	return nil
}

// outputGain reads the gain in an Opus header, in dB (RFC 7845, 5.1).
func outputGain(p page) float64 {
	const at = 16
	if b := p.body(); len(b) >= at+2 {
		return float64(int16(binary.LittleEndian.Uint16(b[at:]))) / 256
	}
	return 0
}

// peeked is how much of a page is looked at: all a header can be, and the first packet of any codec.
const peeked = pageHead + maxLacing + 64

// pageAt reads the beginning of the page at a byte.
func pageAt(r io.ReaderAt, at int64) (page, error) {
	p := make(page, peeked)
	n, err := r.ReadAt(p, at)
	if p = p[:n]; n < pageHead || string(p[:len(capture)]) != capture || n < pageHead+int(p[pageHead-1]) {
		return nil, cutPage(err)
	}
	return p, nil
}

func cutPage(err error) error {
	if err != nil {
		return err
	}
	return ErrDamaged
}

// size is how long the whole page is, also if only its beginning was read.
func (p page) size() int {
	n := pageHead + len(p.lacing())
	for _, l := range p.lacing() {
		n += int(l)
	}
	return n
}

// lastPage reads the last page of a file, or nil if none is seen.
func lastPage(r io.ReaderAt, size int64) page {
	from := max(0, size-maxPage)
	tail := make([]byte, size-from)
	n, _ := r.ReadAt(tail, from)
	for tail = tail[:n]; ; {
		at := bytes.LastIndex(tail, []byte(capture))
		if at < 0 {
			return nil
		}
		if p, err := pageAt(r, from+int64(at)); err == nil {
			return p
		}
		tail = tail[:at]
	}
}
