package media

// mpegHeader is the four-byte header of one MPEG audio frame (ISO/IEC 11172-3 2.4.2.3 and 13818-3).
type mpegHeader struct {
	length  int // bytes of the whole frame; 0 if this is not a header
	frames  int // PCM frames it decodes to
	rate    int // Hz
	bitRate int // bit/s
	layer   int
	mono    bool
	// intensity says that a joint stereo frame of layer 3 keeps some of its bands as one channel.
	intensity bool
	lowRate   bool // MPEG-2 or 2.5: half the side information
}

// Bit rates in kbit/s by index, as in the standards' tables.
var (
	mpegRates  = [3]int{44100, 48000, 32000}
	mpeg1Bits  = [4][15]int{1: {0, 32, 64, 96, 128, 160, 192, 224, 256, 288, 320, 352, 384, 416, 448}, 2: {0, 32, 48, 56, 64, 80, 96, 112, 128, 160, 192, 224, 256, 320, 384}, 3: {0, 32, 40, 48, 56, 64, 80, 96, 112, 128, 160, 192, 224, 256, 320}}
	mpeg2Bits1 = [15]int{0, 32, 48, 56, 64, 80, 96, 112, 128, 144, 160, 176, 192, 224, 256}
	mpeg2Bits  = [15]int{0, 8, 16, 24, 32, 40, 48, 56, 64, 80, 96, 112, 128, 144, 160}
)

// parseMPEG reads a frame header; the zero value means that b does not begin with one. A frame
// of free format (bit rate index 0) does not state its length and is none here; see freeFormat.
func parseMPEG(b []byte) mpegHeader {
	if len(b) < 4 || b[0] != 0xFF || b[1]&0xE0 != 0xE0 {
		return mpegHeader{}
	}
	version, layer := b[1]>>3&3, 4-int(b[1]>>1&3)
	bits, rate := int(b[2]>>4), int(b[2]>>2&3)
	if version == 1 || layer == 4 || bits == 0 || bits == 15 || rate == 3 {
		return mpegHeader{}
	}
	h := mpegHeader{rate: mpegRates[rate], layer: layer, mono: b[3]>>6 == 3, lowRate: version != 3}
	h.intensity = layer == 3 && b[3]>>6 == 1 && b[3]&0x10 != 0
	switch {
	case !h.lowRate:
		h.bitRate = 1000 * mpeg1Bits[layer][bits]
	case layer == 1:
		h.bitRate = 1000 * mpeg2Bits1[bits]
	default:
		h.bitRate = 1000 * mpeg2Bits[bits]
	}
	switch version {
	case 2:
		h.rate /= 2
	case 0:
		h.rate /= 4
	}
	padding := int(b[2] >> 1 & 1)
	switch {
	case layer == 1:
		h.frames = 384
		h.length = (12*h.bitRate/h.rate + padding) * 4
	case layer == 3 && h.lowRate:
		h.frames = 576
		h.length = 72*h.bitRate/h.rate + padding
	default:
		h.frames = 1152
		h.length = 144*h.bitRate/h.rate + padding
	}
	return h
}

// freeFormat reports whether b holds MPEG audio whose frames do not state their bit rate. One then ends where the
// next begins, and all are equally long but for their padding: four in a row are proof.
func freeFormat(b []byte) bool {
	const shortest, longest, tries = 24, 8 << 10, 64
	tried := 0
	for i := 0; i+4 < len(b) && tried < tries; i++ {
		if b[i] != 0xFF || b[i+1]&0xE0 != 0xE0 || b[i+2]>>4 != 0 {
			continue
		}
		same := func(at int) bool {
			return at+2 < len(b) && b[at] == 0xFF && b[at+1] == b[i+1] && b[at+2]&^2 == b[i+2]&^2
		}
		// With another bit rate, it is a header or it is not.
		if parseMPEG([]byte{0xFF, b[i+1], b[i+2] | 0x10, b[i+3]}).length == 0 {
			continue
		}
		tried++
		slot := 1
		if b[i+1]>>1&3 == 3 { // layer 1
			slot = 4
		}
		padding := func(at int) int { return slot * int(b[at+2]>>1&1) }
		for n := shortest; n < longest; n++ {
			for at, chain := i, 1; same(at); at, chain = at+n+padding(at), chain+1 {
				if chain == 4 {
					return true
				}
			}
		}
	}
	return false
}
