package media

import (
	"encoding/binary"
	"fmt"
	"io"
	"os"

	"evenshelf/engine/audio"
)

// gapless is what an MP3's first frame says about the length of the sound. There is no standard for it;
// the layout is common practice among encoders.
type gapless struct {
	note    int   // PCM frames that the note itself would decode to; 0 if the first frame is sound
	frames  int64 // PCM frames of the recording; −1 if not stated
	bitRate int   // bit/s on average; 0 if not stated
	skip    int   // PCM frames to leave out at the start, not counting the note itself
	trimmed bool  // skip and frames come from the encoder's own figures: they are exact

	variable bool  // the bit rate is
	quality  int   // LAME's, of a variable rate: 0, the best, to 9; −1 if not stated
	coded    int64 // PCM frames of all MPEG frames but the note; −1 if not stated
	own      int   // where in the frame the encoder's own figures are; 0 if there are none
}

// decoderDelay is the delay of every MP3 decoder: 528 frames of the filter bank and 1 of the hybrid.
const decoderDelay = 528 + 1

const noteBytes = 512 // of the first MPEG frame, enough for every note

// parseGapless looks for the note in b, which begins with the first MPEG frame.
func parseGapless(b []byte) (mpegHeader, gapless) {
	h, g := parseMPEG(b), gapless{frames: -1, coded: -1, quality: -1}
	if h.layer != 3 {
		return h, g
	}
	at := 36 // after the side information
	switch {
	case h.lowRate && h.mono:
		at = 13
	case h.lowRate != h.mono:
		at = 21
	}
	switch {
	case len(b) >= at+120+36 && (string(b[at:at+4]) == "Xing" || string(b[at:at+4]) == "Info"):
		g.xing(b, at, h)
	case len(b) >= vbriAt+18 && string(b[vbriAt:vbriAt+4]) == "VBRI":
		g.vbri(b[vbriAt:], h)
	}
	return h, g
}

// xing reads the note of most encoders, "Xing" if the bit rate varies, at an offset of the frame b.
func (g *gapless) xing(b []byte, at int, h mpegHeader) {
	g.note, g.variable = h.frames, b[at] == 'X'
	flags, p := b[at+7], at+8
	var size int64 // of all MPEG frames, in bytes
	if flags&1 != 0 {
		if n := binary.BigEndian.Uint32(b[p:]); n > 0 { // 0 is what encoders to a pipe leave there
			g.coded = int64(n) * int64(h.frames)
		}
		p += 4
	}
	if flags&2 != 0 {
		size = int64(binary.BigEndian.Uint32(b[p:]))
		p += 4
	}
	if flags&4 != 0 {
		p += 100
	}
	worse := uint32(0) // than the best: ten for every step of LAME's quality
	if flags&8 != 0 {
		worse = 100 - binary.BigEndian.Uint32(b[p:])
		p += 4
	}
	g.frames = g.coded
	if g.variable { // else it is the header's
		g.mean(size, h)
	}
	maker := string(b[p : p+4])
	if maker != "LAME" && maker != "Lavf" && maker != "Lavc" {
		return // the figures behind an unknown name may mean anything
	}
	g.own = p
	if method := b[p+9] & 15; maker == "LAME" && method >= 3 && method <= 5 && worse < 100 { // variable; 1 and 8 are constant, 2 and 9 average

		g.quality = int(worse / 10)
	}
	delay := int(b[p+21])<<4 | int(b[p+22]>>4)
	padding := int(b[p+22]&15)<<8 | int(b[p+23])
	g.skip = delay + decoderDelay
	if g.frames >= 0 {
		g.frames = max(0, g.frames-int64(g.skip)-int64(max(0, padding-decoderDelay)))
		g.trimmed = true
	}
}

// vbriAt is where the other kind of note begins, in a frame of any kind: behind 32 bytes of nothing.
const vbriAt = 4 + 32

// vbri reads that note. It counts bytes and MPEG frames; how much of them is sound it does not say.
func (g *gapless) vbri(b []byte, h mpegHeader) {
	g.note, g.variable = h.frames, true
	if n := binary.BigEndian.Uint32(b[14:]); n > 0 {
		g.coded = int64(n) * int64(h.frames)
		g.frames = g.coded
	}
	g.mean(int64(binary.BigEndian.Uint32(b[10:])), h)
}

// mean works out the bit rate of so many bytes.
func (g *gapless) mean(size int64, h mpegHeader) {
	if size > 0 && g.coded > 0 {
		g.bitRate = int((8*size*int64(h.rate) + g.coded/2) / g.coded)
	}
}

// noteLength makes the note of the MP3 that FFmpeg has just written say that it holds so many frames. FFmpeg states too
// little padding where less than its own delay is left for the last frame; and its checksum of the note is wrong but in
// MPEG-1 stereo. LAME's is over all of the frame that is in front of it.
func noteLength(f *os.File, frames int64) error {
	start, err := soundStart(f)
	if err != nil {
		return err
	}
	b, err := readAt(f, start, noteBytes)
	if err != nil {
		return err
	}
	_, g := parseGapless(b)
	padding := g.coded - int64(g.skip-decoderDelay) - frames
	if g.own == 0 || g.coded < 0 || padding < 0 || padding > 0xFFF {
		return nil // there is no sound
	}
	const paddingAt, sumAt = 22, 34
	own := b[g.own:]
	own[paddingAt] = own[paddingAt]&0xF0 | byte(padding>>8)
	own[paddingAt+1] = byte(padding)
	binary.BigEndian.PutUint16(own[sumAt:], crc16(b[:g.own+sumAt]))
	_, err = f.WriteAt(own[:sumAt+2], start+int64(g.own))
	return err
}

// crc16 is the checksum with the polynomial x¹⁶ + x¹⁵ + x² + 1, lowest bit first.
func crc16(b []byte) (sum uint16) {
	for _, c := range b {
		sum ^= uint16(c)
		for range 8 {
			sum = sum>>1 ^ 0xA001*(sum&1)
		}
	}
	return sum
}

// lookMPEG finds out what the headers of the MPEG audio that begins at offset start say.
func lookMPEG(r io.ReaderAt, start int64) (finding, error) {
	b, err := readAt(r, start, noteBytes)
	if err != nil {
		return finding{}, err
	}
	head, g := parseGapless(b)
	format := audio.Format{Rate: head.rate, Layout: audio.Stereo}
	if head.mono {
		format.Layout = audio.Mono
	}
	bitRate, variable := g.bitRate, g.variable
	if bitRate == 0 {
		if g.note > 0 {
			start += int64(head.length)
		}
		if bitRate, variable, err = meanBitRate(r, start); err != nil {
			return finding{}, err
		}
	}
	return finding{gapless: g, wire: wireFloat, info: Info{
		Container: "mp3", Codec: fmt.Sprintf("mp%d", head.layer), Format: format, Frames: g.frames, BitRate: bitRate, Variable: variable, Quality: g.quality,
	}}, checkFormat(format, start)
}

// meanBitRate returns the bit rate of the first MPEG frames from an offset on, some seconds of sound: of
// all there are where the rate is constant, an estimate where it varies.
func meanBitRate(r io.ReaderAt, start int64) (mean int, varies bool, err error) {
	b, err := readAt(r, start, 64<<10)
	sum, n, last := 0, 0, 0
	for h := parseMPEG(b); h.length > 0; h = parseMPEG(b) {
		varies = varies || n > 0 && h.bitRate != last
		sum, n, last = sum+h.bitRate, n+1, h.bitRate
		b = b[min(h.length, len(b)):]
	}
	return sum / max(1, n), varies, err
}
