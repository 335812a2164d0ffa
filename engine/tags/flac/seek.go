package flac

import (
	"encoding/binary"
	"io"
	"math/bits"
)

const (
	seekSeconds = 10     // from one seek point to the next, about
	maxPoints   = 10_000 // more than a day; the points of longer recordings lie further apart
	pointBytes  = 18
	maxWindow   = 2 << 20 // bytes read at once; larger than two of the largest frames there are
)

// SeekBytes is how long the seek table of so many frames will be at most.
func SeekBytes(frames uint64, rate int) int64 {
	return pointBytes * int64(1+frames/uint64(max(1, step(frames, rate))))
}

// step is the distance of seek points in frames.
func step(frames uint64, rate int) int64 {
	return max(seekSeconds*int64(rate), int64(frames/maxPoints), 1)
}

// place is where a FLAC frame begins.
type place struct {
	sample int64
	at     int64 // byte of the file
}

// MakeSeekTable makes the body of a seek table (RFC 9639, 8.5) for the sound of a file, which lies from one byte to
// another and is what info says. It does not read all of it: for each point it jumps to where the frame should be if
// the bit rate were steady, and again from what it finds there. So points may lie a second beside their place, and
// where nothing is found there are none.
func MakeSeekTable(r io.ReaderAt, from, to int64, info Info) ([]byte, error) {
	s := search{r: r, to: to, info: info}
	last, end := place{0, from}, place{int64(info.NSamples), to}
	if end.sample == 0 {
		return nil, nil
	}
	table := s.point(nil, from, last)
	by := step(info.NSamples, info.SampleRate)
	for target := by; target < end.sample && s.err == nil; target += by {
		if p := s.near(target, int64(info.SampleRate), last, end); p.sample > last.sample {
			table, last = s.point(table, from, p), p
		}
	}
	return table, s.err
}

// point appends a seek point. Its last figure is the length of the frame, which only the last frame has shorter.
func (s *search) point(table []byte, from int64, p place) []byte {
	table = binary.BigEndian.AppendUint64(table, uint64(p.sample))
	table = binary.BigEndian.AppendUint64(table, uint64(p.at-from))
	return binary.BigEndian.AppendUint16(table, uint16(min(int64(s.info.BlockSize), int64(s.info.NSamples)-p.sample)))
}

// search looks for frames in a file.
type search struct {
	r    io.ReaderAt
	to   int64
	info Info
	buf  []byte
	err  error
}

// near finds a frame that begins at most so many samples from the target, or as near as it comes, between two places.
// It returns lo if there is none.
func (s *search) near(target, within int64, lo, hi place) place {
	best := lo
	for range 2 * bits.Len64(uint64(max(0, hi.at-lo.at))) {
		guess := lo.at + int64(float64(target-lo.sample)/float64(hi.sample-lo.sample)*float64(hi.at-lo.at))
		p, ok := s.next(max(guess, lo.at+1))
		switch {
		case !ok || p.at >= hi.at: // guessed beyond the last one
			hi.at = guess
		case p.sample <= lo.sample || p.sample >= hi.sample:
			return best // not what was written
		case p.sample < target:
			best, lo = p, p
		default:
			best, hi = p, p
		}
		if s.err != nil || best == p && max(best.sample-target, target-best.sample) <= within || hi.at-lo.at < 2 {
			break
		}
	}
	return best
}

// next finds the first frame that begins at a byte or behind it. A header is sixteen bits of pattern and eight of
// checksum; it is believed if the frame with the next number follows.
func (s *search) next(at int64) (place, bool) {
	longest := s.info.MaxFrame
	if longest == 0 {
		longest = maxWindow / 2
	}
	window := int64(min(2*longest+maxHeader, maxWindow))
	if int64(cap(s.buf)) < window {
		s.buf = make([]byte, window)
	}
	b := s.buf[:max(0, min(window, s.to-at))]
	if _, err := s.r.ReadAt(b, at); err != nil && err != io.EOF {
		s.err = err
		return place{}, false
	}
	for i := range b {
		n, ok := s.number(b[i:])
		if !ok {
			continue
		}
		for j := i + 1; j < len(b); j++ {
			if m, ok := s.number(b[j:]); ok && m == n+1 {
				return place{n * int64(s.info.BlockSize), at + int64(i)}, true
			}
		}
	}
	return place{}, false
}

const maxHeader = 16

// number reads the header of a frame (RFC 9639, 9.1) in a stream of fixed block size and returns the frame's number.
func (s *search) number(b []byte) (n int64, ok bool) {
	if len(b) < maxHeader || b[0] != 0xFF || b[1] != 0xF8 || b[3]&1 != 0 {
		return 0, false
	}
	lead := bits.LeadingZeros8(^b[4]) // the number is written as UTF-8 would be, of up to 36 bits
	if lead == 1 || lead > 7 {
		return 0, false
	}
	n = int64(b[4] & (0xFF >> (lead + 1)))
	end := 5
	for ; end < 4+lead; end++ {
		if b[end]&0xC0 != 0x80 {
			return 0, false
		}
		n = n<<6 | int64(b[end]&0x3F)
	}
	switch b[2] >> 4 { // block size
	case 0:
		return 0, false
	case 6:
		end++
	case 7:
		end += 2
	}
	switch b[2] & 15 { // sampling rate
	case 12:
		end++
	case 13, 14:
		end += 2
	case 15:
		return 0, false
	}
	return n, crc8(b[:end]) == b[end]
}

// crc8 is the checksum of frame headers: polynomial x⁸ + x² + x + 1 (RFC 9639, 9.1.8).
func crc8(b []byte) (crc byte) {
	for _, x := range b {
		crc ^= x
		for range 8 {
			if crc&0x80 != 0 {
				crc = crc<<1 ^ 0x07
			} else {
				crc <<= 1
			}
		}
	}
	return crc
}
