//go:build !race

package level

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"slices"
	"strings"
)

// lies are files made to do harm: playlists and references that lead elsewhere, sizes nobody has memory for, hours of
// nothing in a few bytes. away is a file outside of the shelf that must not be read, and url one that must not be asked.
func lies(files map[string][]byte, away, url string) map[string][]byte {
	le, be := binary.LittleEndian, binary.BigEndian
	wav := func(format, rest []byte) []byte {
		b := append([]byte("WAVE"), append(chunk("fmt ", format), rest...)...)
		return append(le.AppendUint32([]byte("RIFF"), uint32(len(b))), b...)
	}
	pcm := func(tag, channels uint16, rate uint32, align, bits uint16) []byte {
		b := le.AppendUint16(le.AppendUint16(nil, tag), channels)
		b = le.AppendUint32(le.AppendUint32(b, rate), rate*uint32(align))
		return le.AppendUint16(le.AppendUint16(b, align), bits)
	}
	id3 := func(size uint32, body string) []byte {
		return append([]byte{'I', 'D', '3', 3, 0, 0, byte(size >> 21 & 127), byte(size >> 14 & 127), byte(size >> 7 & 127), byte(size & 127)}, body...)
	}
	ds64 := func(riff, data, frames uint64, table uint32) []byte {
		b := le.AppendUint64(le.AppendUint64(le.AppendUint64(nil, riff), data), frames)
		return append(append([]byte("RF64\xFF\xFF\xFF\xFFWAVE"), chunk("ds64", le.AppendUint32(b, table))...), chunk("fmt ", pcm(1, 2, 44100, 4, 16))...)
	}
	sound := bytes.Repeat([]byte{1, 2, 3, 4}, 20_000)
	deep := []byte{}
	for range 2000 {
		deep = box("udta", deep)
	}
	nested := []byte{}
	for range 300 {
		nested = box("moov", box("trak", box("mdia", nested)))
	}
	silence := silentFLAC(3600)
	out := map[string][]byte{
		"empty.wav": {}, "zeros.mp3": make([]byte, 100_000), "ones.mp3": bytes.Repeat([]byte{0xFF}, 100_000),
		"playlist.mp3":  []byte("#EXTM3U\n#EXTINF:1,x\nfile://" + away + "\n"),
		"stream.wav":    []byte("#EXTM3U\n#EXT-X-VERSION:3\n#EXT-X-TARGETDURATION:10\n#EXTINF:10,\n" + url + "\n#EXT-X-ENDLIST\n"),
		"list.flac":     []byte("ffconcat version 1.0\nfile '" + away + "'\n"),
		"list.pls.mp3":  []byte("[playlist]\nFile1=" + url + "\nNumberOfEntries=1\n"),
		"session.ogg":   []byte("v=0\no=- 0 0 IN IP4 127.0.0.1\ns=x\nc=IN IP4 127.0.0.1\nt=0 0\nm=audio 5004 RTP/AVP 0\n"),
		"manifest.m4a":  []byte("<?xml version=\"1.0\"?><MPD><Period><AdaptationSet><BaseURL>" + url + "</BaseURL></AdaptationSet></Period></MPD>"),
		"page.opus":     []byte("<!DOCTYPE html><html><audio src=\"" + url + "\"></audio></html>"),
		"subtitles.mkv": []byte("1\n00:00:00,000 --> 00:00:01,000\nhello\n"),
		"reference.mov": append(box("ftyp", []byte("qt  \x00\x00\x02\x00qt  ")),
			box("moov", box("rmra", box("rmda", box("rdrf", []byte("\x00\x00\x00\x00url "), be.AppendUint32(nil, uint32(len(url)+1)), []byte(url+"\x00")))))...),
		"elsewhere.m4a": elsewhere(files["aac.m4a"], away),
		"elsewhere.mov": elsewhere(files["a.mov"], url),
		"deep.m4a":      append(box("ftyp", []byte("M4A \x00\x00\x00\x00")), box("moov", deep)...),
		"deep.mp4":      append(box("ftyp", []byte("isom\x00\x00\x00\x00")), nested...),
		"zero boxes.mp4": append(box("ftyp", []byte("isom\x00\x00\x00\x00")),
			bytes.Repeat([]byte{0, 0, 0, 8, 'f', 'r', 'e', 'e'}, 20_000)...),
		"endless box.mp4":  append(box("ftyp", []byte("isom\x00\x00\x00\x00")), 0, 0, 0, 1, 'm', 'o', 'o', 'v', 255, 255, 255, 255, 255, 255, 255, 255),
		"no channels.wav":  wav(pcm(1, 0, 44100, 0, 16), chunk("data", sound)),
		"all channels.wav": wav(pcm(1, 65535, 44100, 65535, 16), chunk("data", sound)),
		"no rate.wav":      wav(pcm(1, 2, 0, 4, 16), chunk("data", sound)),
		"all rate.wav":     wav(pcm(1, 2, 0xFFFFFFFF, 4, 16), chunk("data", sound)),
		"no bits.wav":      wav(pcm(1, 2, 44100, 4, 0), chunk("data", sound)),
		"odd align.wav":    wav(pcm(1, 2, 44100, 3, 16), chunk("data", sound)),
		"no align.wav":     wav(pcm(1, 2, 44100, 0, 16), chunk("data", sound)),
		"strange tag.wav":  wav(pcm(0xABCD, 2, 44100, 4, 16), chunk("data", sound)),
		"short fmt.wav":    wav([]byte{1, 0, 2, 0}, chunk("data", sound)),
		"no data.wav":      wav(pcm(1, 2, 44100, 4, 16), nil),
		"no sound.wav":     wav(pcm(1, 2, 44100, 4, 16), chunk("data", nil)),
		"all data.wav":     wav(pcm(1, 2, 44100, 4, 16), append([]byte("data\xFF\xFF\xFF\xFF"), sound...)),
		"not finite.wav":   wav(pcm(3, 1, 44100, 4, 32), chunk("data", bytes.Repeat([]byte{0, 0, 0xC0, 0x7F, 0, 0, 0x80, 0xFF}, 20_000))),
		"huge floats.wav":  wav(pcm(3, 1, 44100, 4, 32), chunk("data", bytes.Repeat([]byte{0xFF, 0xFF, 0x7F, 0x7F, 0xFF, 0xFF, 0x7F, 0xFF}, 20_000))),
		"many chunks.wav":  wav(pcm(1, 2, 44100, 4, 16), append(bytes.Repeat(chunk("note", nil), 50_000), chunk("data", sound)...)),
		"giant chunk.wav":  wav(pcm(1, 2, 44100, 4, 16), append(append([]byte("bext\xF0\xFF\xFF\xFF"), sound...), chunk("data", sound)...)),
		"short bext.wav":   wav(pcm(1, 2, 44100, 4, 16), append(chunk("bext", make([]byte, 17)), chunk("data", sound)...)),
		"short cart.wav":   wav(pcm(1, 2, 44100, 4, 16), append(chunk("cart", []byte("0101")), chunk("data", sound)...)),
		"lying cues.wav":   wav(pcm(1, 2, 44100, 4, 16), append(chunk("cue ", []byte{255, 255, 255, 255, 1}), chunk("data", sound)...)),
		"giant.rf64.wav":   append(ds64(1<<63, 1<<62, 1<<60, 0), append([]byte("data\xFF\xFF\xFF\xFF"), sound...)...),
		"table.rf64.wav":   append(ds64(1<<20, 80_000, 20_000, 0xFFFFFFFF), append([]byte("data\xFF\xFF\xFF\xFF"), sound...)...),
		"giant id3.mp3":    append(id3(0x0FFFFFFF, "TIT2"), files["cbr.mp3"]...),
		"only id3.mp3":     id3(20, strings.Repeat("\x00", 20)),
		"frame lies.mp3":   append(id3(2000, "APIC\x7F\xFF\xFF\xFF\x00\x00"+strings.Repeat("x", 1990)), files["cbr.mp3"]...),
		"many id3.mp3":     append(bytes.Repeat(id3(10, strings.Repeat("\x00", 10)), 5000), files["cbr.mp3"]...),
		"giant block.flac": append([]byte("fLaC\x06\xFF\xFF\xFF"), files["a.flac"][4:]...),
		"many blocks.flac": append(append(bytes.Clone(files["a.flac"][:42]), bytes.Repeat([]byte{2, 0, 0, 0}, 300_000)...), files["a.flac"][42:]...),
		"comments.flac":    append(append(bytes.Clone(files["a.flac"][:42]), 4, 0, 0, 8, 0, 0, 0, 0, 0xFF, 0xFF, 0xFF, 0xFF), files["a.flac"][42:]...),
		"silence.flac":     silence,
		"no pages.ogg":     append([]byte("OggS"), make([]byte, 5000)...),
		"same page.ogg":    bytes.Repeat(files["a.ogg"][:58], 2000),
		"head only.opus":   files["a.opus"][:47],
		"wrong name.flac":  files["cbr.mp3"],
		"wrong name.mp3":   files["aac.m4a"],
		"wrong name.wav":   files["a.mkv"],
		"archive.flac":     append([]byte("PK\x03\x04"), make([]byte, 4000)...),
		"picture.mp3":      append([]byte("\x89PNG\r\n\x1a\n"), make([]byte, 4000)...),
	}
	for n, kind := range []string{"data:audio/wav;base64,AAAA", "concat:" + away, "subfile,,start,0,end,100,,:" + away, "http://127.0.0.1:1/x", "crypto:" + away} {
		out[fmt.Sprintf("protocol %d.mp3", n)] = []byte(kind)
	}
	return out
}

// elsewhere is a file in ISO base media whose tracks say that their sound is to be found at another place
// (ISO/IEC 14496-12, 8.7.2), with its moov behind the sound.
func elsewhere(b []byte, place string) []byte {
	here := box("url ", []byte{0, 0, 0, 1})
	there := box("url ", []byte{0, 0, 0, 0}, []byte(place+"\x00"))
	b = bytes.Clone(b)
	for from := 0; ; {
		at := bytes.Index(b[from:], here)
		if at < 0 {
			return b
		}
		at += from
		for _, around := range []string{"moov", "trak", "mdia", "minf", "dinf", "dref"} {
			size := b[bytes.LastIndex(b[:at], []byte(around))-4:]
			binary.BigEndian.PutUint32(size, binary.BigEndian.Uint32(size)+uint32(len(there)-len(here)))
		}
		b = slices.Replace(b, at, at+len(here), there...)
		from = at + len(there)
	}
}

// silentFLAC is digital silence, mono at 48 kHz, in a few bytes a second: FLAC codes a frame of one value as that value
// (RFC 9639, 9.2.3).
func silentFLAC(seconds int) []byte {
	const block, rate = 32768, 48000
	frames := seconds * rate / block
	info := make([]byte, 34)
	binary.BigEndian.PutUint16(info, block)
	binary.BigEndian.PutUint16(info[2:], block)
	binary.BigEndian.PutUint64(info[10:], uint64(rate)<<44|15<<36|uint64(frames*block)) // 1 channel, 16 bits
	b := append([]byte("fLaC\x80\x00\x00\x22"), info...)
	for n := range frames {
		f := append([]byte{0xFF, 0xF8, 0xFA, 0x08}, coded(n)...) // fixed blocks; 32768 frames at 48 kHz; mono of 16 bits
		f = append(f, crc8(f))
		f = append(f, 0, 0, 0) // a constant subframe of 0
		c := crc16(f)
		b = append(append(b, f...), byte(c>>8), byte(c))
	}
	return b
}

// coded is a frame's number in the form of UTF-8 (RFC 9639, 9.1.5).
func coded(n int) []byte { return []byte(string(rune(n))) }

func crc8(b []byte) (c byte) {
	for _, x := range b {
		c ^= x
		for range 8 {
			c = c<<1 ^ 0x07*(c>>7)
		}
	}
	return c
}

func crc16(b []byte) (c uint16) {
	for _, x := range b {
		c ^= uint16(x) << 8
		for range 8 {
			c = c<<1 ^ 0x8005*(c>>15)
		}
	}
	return c
}
