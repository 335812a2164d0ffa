package media

import (
	"encoding/binary"
	"fmt"
	"io"

	"evenshelf/engine/audio"
)

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

// gapless is what an MP3's first frame says about the length of the sound. There is no standard for it;
// the layout is common practice among encoders.
type gapless struct {
	note    int   // PCM frames that the note itself would decode to; 0 if the first frame is sound
	frames  int64 // PCM frames of the recording; −1 if not stated
	bitRate int   // bit/s on average; 0 if not stated
	skip    int   // PCM frames to leave out at the start, not counting the note itself
	trimmed bool  // skip and frames come from the encoder's own figures: they are exact
}

// decoderDelay is the delay of every MP3 decoder: 528 frames of the filter bank and 1 of the hybrid.
const decoderDelay = 528 + 1

// readGapless looks for the note in the first MPEG frame, which begins at offset start.
func readGapless(r io.ReaderAt, start int64) (mpegHeader, gapless, error) {
	b, err := readAt(r, start, 512)
	if err != nil {
		return mpegHeader{}, gapless{}, err
	}
	h, g := parseMPEG(b), gapless{frames: -1}
	if h.layer != 3 {
		return h, g, nil
	}
	at := 36 // after the side information
	switch {
	case h.lowRate && h.mono:
		at = 13
	case h.lowRate != h.mono:
		at = 21
	}
	if len(b) < at+120+24 || string(b[at:at+4]) != "Xing" && string(b[at:at+4]) != "Info" {
		return h, g, nil
	}
	g.note = h.frames
	flags, p := b[at+7], at+8
	var coded int64 // bytes of all MPEG frames
	if flags&1 != 0 {
		if n := binary.BigEndian.Uint32(b[p:]); n > 0 { // 0 is what encoders to a pipe leave there
			g.frames = int64(n) * int64(h.frames)
		}
		p += 4
	}
	if flags&2 != 0 {
		coded = int64(binary.BigEndian.Uint32(b[p:]))
		p += 4
	}
	if flags&4 != 0 {
		p += 100
	}
	if flags&8 != 0 {
		p += 4
	}
	if coded > 0 && g.frames > 0 && string(b[at:at+4]) == "Xing" { // "Info" is a constant rate: the header's
		g.bitRate = int((8*coded*int64(h.rate) + g.frames/2) / g.frames)
	}
	if maker := string(b[p : p+4]); maker != "LAME" && maker != "Lavf" && maker != "Lavc" {
		return h, g, nil // the figures behind an unknown name may mean anything
	}
	delay := int(b[p+21])<<4 | int(b[p+22]>>4)
	padding := int(b[p+22]&15)<<8 | int(b[p+23])
	g.skip = delay + decoderDelay
	if g.frames >= 0 {
		g.frames = max(0, g.frames-int64(g.skip)-int64(max(0, padding-decoderDelay)))
		g.trimmed = true
	}
	return h, g, nil
}

// lookMPEG finds out what the headers of the MPEG audio that begins at offset start say.
func lookMPEG(r io.ReaderAt, start int64) (finding, error) {
	head, g, err := readGapless(r, start)
	if err != nil {
		return finding{}, err
	}
	format := audio.Format{Rate: head.rate, Layout: audio.Stereo}
	if head.mono {
		format.Layout = audio.Mono
	}
	bitRate := g.bitRate
	if bitRate == 0 {
		if g.note > 0 {
			start += int64(head.length)
		}
		if bitRate, err = meanBitRate(r, start); err != nil {
			return finding{}, err
		}
	}
	return finding{gapless: g, wire: wireFloat, info: Info{
		Container: "mp3", Codec: fmt.Sprintf("mp%d", head.layer), Format: format, Frames: g.frames, BitRate: bitRate,
	}}, checkFormat(format, start)
}

// meanBitRate returns the bit rate of the first MPEG frames from an offset on, some seconds of sound: of
// all there are where the rate is constant, an estimate where it is not.
func meanBitRate(r io.ReaderAt, start int64) (int, error) {
	b, err := readAt(r, start, 64<<10)
	sum, n := 0, 0
	for h := parseMPEG(b); h.length > 0; h = parseMPEG(b) {
		sum, n = sum+h.bitRate, n+1
		b = b[min(h.length, len(b)):]
	}
	return sum / max(1, n), err
}
