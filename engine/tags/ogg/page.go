package ogg

import (
	"bufio"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
)

// A page (RFC 3533, 6): a header of 27 bytes, up to 255 lacing values of one byte, and as many bytes as they sum up to.
// A packet is cut into pieces of 255 bytes, of which the last is shorter, perhaps empty; a packet may run over pages.
const (
	capture    = "OggS"
	pageHead   = 27
	maxLacing  = 255
	maxPage    = pageHead + maxLacing + 255*maxLacing
	continued  = 1 // flags: begins with the rest of a packet
	first      = 2 //        of a logical stream
	lastOf     = 4
	noGranule  = ^uint64(0) // no packet ends on the page
	flagsAt    = 5
	granuleAt  = 6
	serialAt   = 14
	sequenceAt = 18
	crcAt      = 22
)

// page is a whole page as it stands in a file.
type page []byte

func (p page) has(flag byte) bool { return p[flagsAt]&flag != 0 }
func (p page) serial() uint32     { return binary.LittleEndian.Uint32(p[serialAt:]) }
func (p page) sequence() uint32   { return binary.LittleEndian.Uint32(p[sequenceAt:]) }
func (p page) lacing() []byte     { return p[pageHead:][:p[pageHead-1]] }
func (p page) body() []byte       { return p[pageHead+len(p.lacing()):] }

// renumber gives a page another number.
func (p page) renumber(sequence uint32) {
	binary.LittleEndian.PutUint32(p[sequenceAt:], sequence)
	p.seal()
}

// seal writes the checksum.
func (p page) seal() { binary.LittleEndian.PutUint32(p[crcAt:], p.crc()) }

// crc is the checksum of a page, in which the field for it counts as zero.
func (p page) crc() uint32 {
	crc := checksum(0, p[:crcAt])
	crc = checksum(crc, []byte{0, 0, 0, 0})
	return checksum(crc, p[crcAt+4:])
}

// crcTables are for the polynomial 0x04C11DB7, highest bit first, without inversions (RFC 3533, 6): the first for the
// last byte of eight that are taken at once, and so on to the eighth for the first.
var crcTables = func() (tables [8][256]uint32) {
	for i := range tables[0] {
		crc := uint32(i) << 24
		for range 8 {
			if crc&(1<<31) != 0 {
				crc = crc<<1 ^ 0x04C11DB7
			} else {
				crc <<= 1
			}
		}
		tables[0][i] = crc
	}
	for k := 1; k < len(tables); k++ {
		for i, crc := range tables[k-1] {
			tables[k][i] = crc<<8 ^ tables[0][crc>>24]
		}
	}
	return tables
}()

func checksum(crc uint32, b []byte) uint32 {
	t := &crcTables
	for ; len(b) >= 8; b = b[8:] {
		crc ^= binary.BigEndian.Uint32(b)
		crc = t[7][crc>>24] ^ t[6][crc>>16&255] ^ t[5][crc>>8&255] ^ t[4][crc&255] ^ t[3][b[4]] ^ t[2][b[5]] ^ t[1][b[6]] ^ t[0][b[7]]
	}
	for _, x := range b {
		crc = crc<<8 ^ t[0][byte(crc>>24)^x]
	}
	return crc
}

// pages reads the pages of a file one after the other.
type pages struct {
	r   *bufio.Reader
	at  int64 // where the next one begins
	buf [maxPage]byte
}

func newPages(r io.Reader) *pages { return &pages{r: bufio.NewReaderSize(r, 2*maxPage)} }

// next returns the next page, which is good until the one after it is asked for, or io.EOF behind the last. Whatever
// is not a whole page with the right checksum is an error: it could not be written anew without hiding the damage.
func (r *pages) next() (page, error) {
	p := page(r.buf[:pageHead])
	if n, err := io.ReadFull(r.r, p); err != nil && (n == 0 || err != io.ErrUnexpectedEOF) {
		return nil, err
	} else if string(p[:min(n, 5)]) != capture+"\x00" { // the fifth byte is the version
		return nil, r.damaged("something that is not a page")
	} else if err != nil {
		return nil, r.damaged("a cut page")
	}
	p = page(r.buf[:pageHead+int(p[pageHead-1])])
	if _, err := io.ReadFull(r.r, p[pageHead:]); err != nil {
		return nil, r.cut(err)
	}
	head, size := len(p), p.size()
	p = page(r.buf[:size])
	if _, err := io.ReadFull(r.r, p[head:]); err != nil {
		return nil, r.cut(err)
	}
	if p.crc() != binary.LittleEndian.Uint32(p[crcAt:]) {
		return nil, r.damaged("a page with a wrong checksum")
	}
	r.at += int64(size)
	return p, nil
}

func (r *pages) cut(err error) error {
	if err == io.EOF || err == io.ErrUnexpectedEOF {
		return r.damaged("a cut page")
	}
	return err
}

func (r *pages) damaged(what string) error {
	return &damage{r.at, what}
}

// damage says what is wrong with a file and where.
type damage struct {
	at   int64
	what string
}

func (d *damage) Error() string {
	return fmt.Sprintf("its Ogg stream holds %s (at byte %d)", d.what, d.at)
}
func (d *damage) Unwrap() error { return ErrDamaged }

var (
	// ErrDamaged is wrapped when a file breaks the rules of Ogg or of its codec.
	ErrDamaged = errors.New("damaged")
	// ErrOther is wrapped when a file holds something else than one stream of Vorbis or Opus after the other.
	ErrOther = errors.New("this is Ogg with something else than a stream of Vorbis or Opus")
	// ErrUnlike is wrapped when the links of a chained file do not make one sound.
	ErrUnlike = errors.New("the parts of this chained Ogg file do not make one sound")
)

// paginate cuts packets into pages of a logical stream, the first of which has the number given, and hands them to
// put. It returns the number after the last. They are header packets: their pages have the time 0 (Vorbis I, A.2;
// RFC 7845, 5). The last page takes over the flag of an end.
func paginate(packets [][]byte, serial, sequence uint32, end bool, put func(page) error) (uint32, error) {
	var lacing, body []byte
	flags := byte(0)
	ends := false // a packet ends on the page
	flush := func(flag byte) error {
		granule := noGranule
		if ends {
			granule = 0
		}
		p := append(make(page, 0, pageHead+len(lacing)+len(body)), capture+"\x00"...)
		p = append(p, flags|flag)
		p = binary.LittleEndian.AppendUint64(p, granule)
		p = binary.LittleEndian.AppendUint32(p, serial)
		p = binary.LittleEndian.AppendUint32(p, sequence)
		p = append(p, 0, 0, 0, 0, byte(len(lacing)))
		p = append(append(p, lacing...), body...)
		p.seal()
		sequence++
		lacing, body, flags, ends = lacing[:0], body[:0], 0, false
		return put(p)
	}
	for _, packet := range packets {
		for whole := false; !whole; {
			if len(lacing) == maxLacing {
				begun := lacing[maxLacing-1] == 255
				if err := flush(0); err != nil {
					return sequence, err
				}
				if begun {
					flags = continued
				}
			}
			n := min(len(packet), 255)
			lacing, body, packet = append(lacing, byte(n)), append(body, packet[:n]...), packet[n:]
			whole = n < 255
			ends = ends || whole
		}
	}
	flag := byte(0)
	if end {
		flag = lastOf
	}
	return sequence, flush(flag)
}
