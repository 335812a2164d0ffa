package ogg

import (
	"bytes"
	"encoding/binary"
	"errors"
	"io"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/tags"
	"evenshelf/engine/tags/vorbis"
)

// made makes a page, put down from RFC 3533, 6.
func made(flags byte, granule int64, serial, sequence uint32, lacing []byte, body string) []byte {
	b := append([]byte("OggS\x00"), flags)
	b = binary.LittleEndian.AppendUint64(b, uint64(granule))
	b = binary.LittleEndian.AppendUint32(b, serial)
	b = binary.LittleEndian.AppendUint32(b, sequence)
	b = append(b, 0, 0, 0, 0, byte(len(lacing)))
	b = append(append(b, lacing...), body...)
	binary.LittleEndian.PutUint32(b[22:], slowCRC(b))
	return b
}

// slowCRC is the checksum bit by bit.
func slowCRC(b []byte) (crc uint32) {
	for i, x := range b {
		if i >= 22 && i < 26 {
			x = 0
		}
		for bit := 7; bit >= 0; bit-- {
			high := crc>>31 ^ uint32(x>>bit&1)
			crc = crc<<1 ^ high*0x04C11DB7
		}
	}
	return crc
}

func comment(entries ...string) string {
	return string(vorbis.Comment{Vendor: "v", Entries: entries}.Bytes())
}

// file is an Opus file of three pages.
func file(serial uint32, entries ...string) []byte {
	head, tag := "OpusHead\x01\x01\x38\x01\x80\xbb\x00\x00\x00\x00\x00", "OpusTags"+comment(entries...)
	return slices.Concat(
		made(first, 0, serial, 0, []byte{byte(len(head))}, head),
		made(0, 0, serial, 1, []byte{byte(len(tag))}, tag),
		made(lastOf, 960, serial, 2, []byte{3, 0}, "\xfc\xff\xfe"),
	)
}

func edited(t testing.TB, b []byte, to ...string) []byte {
	t.Helper()
	var out bytes.Buffer
	if err := Edit(&out, bytes.NewReader(b), func(_ string, c *vorbis.Comment) { c.Entries = to }); err != nil {
		t.Fatal(err)
	}
	return out.Bytes()
}

func TestEditOfOnePageStaysOnOne(t *testing.T) {
	if got, want := edited(t, file(7, "a=b", "GAIN=1"), "a=b", "c=d"), file(7, "a=b", "c=d"); !bytes.Equal(got, want) {
		t.Errorf("%q\n%q", got, want)
	}
}

// Packets whose length is just under, at and over what fits: 255 pieces make a page, and one of a multiple of 255 bytes
// ends with an empty piece. What is behind moves up in number and has its checksum.
func TestCommentsOverPages(t *testing.T) {
	for _, n := range []int{0, 200, 254, 255, 256, 510, 65024, 65025, 65026, 65279, 65280, 65281, 130050, 300_000} {
		entry := strings.Repeat("x", max(0, n-len("OpusTags"+comment(""))))
		b := edited(t, file(7, "a=b"), entry)
		packet := len("OpusTags" + comment(entry))
		pieces := packet/255 + 1
		var got []page
		for in := newPages(bytes.NewReader(b)); ; {
			p, err := in.next()
			if err == io.EOF {
				break
			} else if err != nil {
				t.Fatal(n, err)
			}
			got = append(got, slices.Clone(p))
		}
		if want := 2 + (pieces+254)/255; len(got) != want {
			t.Errorf("%d bytes: %d pages, want %d", packet, len(got), want)
		}
		for i, p := range got {
			header := i > 0 && i < len(got)-1
			if int(p.sequence()) != i || p.has(continued) != (header && i > 1) || p.crc() != slowCRC(p) {
				t.Errorf("%d bytes: page %d has number %d and flags %x", packet, i, p.sequence(), p[flagsAt])
			}
			if granule := binary.LittleEndian.Uint64(p[granuleAt:]); header && (granule == 0) != (i == len(got)-2) {
				t.Errorf("%d bytes: page %d has the time %d", packet, i, int64(granule))
			}
		}
		codec, c, err := Comments(bytes.NewReader(b))
		if err != nil || codec != "opus" || c.Vendor != "v" || !slices.Equal(c.Entries, []string{entry}) {
			t.Errorf("%d bytes: %s, %v", packet, codec, err)
		}
		if back := edited(t, b, "a=b"); !bytes.Equal(back, file(7, "a=b")) {
			t.Errorf("%d bytes: the way back leads elsewhere", packet)
		}
	}
}

func TestEditRefuses(t *testing.T) {
	one, two := file(1), file(2)
	head, tag := len(made(first, 0, 1, 0, []byte{19}, string(one[28:47]))), "OpusTags"+comment()
	sound := made(lastOf, 960, 1, 2, []byte{3}, "abc")
	for name, test := range map[string]struct {
		b   []byte
		why error
	}{
		"two streams beginning":  {slices.Concat(one[:head], two[:head], one[head:], two[head:]), ErrOther},
		"two streams mixed":      {slices.Concat(one, two[head:]), ErrOther},
		"no beginning":           {one[head:], ErrOther},
		"Speex":                  {made(first, 0, 1, 0, []byte{8}, "Speex   "), ErrOther},
		"nothing":                {nil, ErrDamaged},
		"no comments":            {one[:head], ErrDamaged},
		"comments that are none": {slices.Concat(one[:head], made(0, 0, 1, 1, []byte{3}, "abc"), sound), ErrDamaged},
		"damaged comments":       {slices.Concat(one[:head], made(0, 0, 1, 1, []byte{byte(len(tag) - 1)}, tag[:len(tag)-1]), sound), ErrDamaged},
		"sound beside comments":  {slices.Concat(one[:head], made(0, 0, 1, 1, []byte{byte(len(tag)), 1}, tag+"x"), sound), ErrDamaged},
		"the rest of a packet":   {slices.Concat(one[:head], made(continued, 0, 1, 1, []byte{byte(len(tag))}, tag), sound), ErrDamaged},
		"junk":                   {append(slices.Clone(one), "junk"...), ErrDamaged},
	} {
		if err := Edit(io.Discard, bytes.NewReader(test.b), func(string, *vorbis.Comment) {}); !errors.Is(err, test.why) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// Side by side with a film or another sound, the first sound is the one that counts.
func TestCommentsOfTheFirstSound(t *testing.T) {
	one, two := file(1, "a=1"), file(2, "a=2")
	head := 27 + 1 + 19
	film := made(first, 0, 9, 0, []byte{7}, "\x80theora")
	b := slices.Concat(film, one[:head], two[:head], made(0, 0, 9, 1, []byte{3}, "abc"), two[head:], one[head:])
	if codec, c, err := Comments(bytes.NewReader(b)); err != nil || codec != "opus" || !slices.Equal(c.Entries, []string{"a=1"}) {
		t.Errorf("%s %q %v", codec, c.Entries, err)
	}
	for name, b := range map[string][]byte{"film": film, "FLAC": made(first, 0, 1, 0, []byte{6}, "\x7FFLAC\x01"), "none": made(0, 0, 1, 0, nil, "")} {
		if codec, _, err := Comments(bytes.NewReader(b)); !errors.Is(err, ErrOther) || (codec == "flac") != (name == "FLAC") {
			t.Errorf("%s: %s %v", name, codec, err)
		}
	}
}

func oggFLAC(headers byte) []byte {
	id := "\x7FFLAC\x01\x00\x00" + string([]byte{headers}) + "fLaC\x00\x00\x00\x03abc"
	return slices.Concat(made(first, 0, 1, 0, []byte{byte(len(id))}, id), made(0, 0, 1, 1, []byte{6}, "\x84\x00\x00\x02xy"), made(lastOf, 9, 1, 2, []byte{1}, "s"))
}

// The example is put together by RFC 9639, 10.1: one more header, the mark, a block, and a packet with the last block.
func TestFLACHead(t *testing.T) {
	b := oggFLAC(1)
	if got, err := FLACHead(bytes.NewReader(b)); err != nil || string(got) != "fLaC\x00\x00\x00\x03abc\x84\x00\x00\x02xy" {
		t.Errorf("%q, %v", got, err)
	}
	for name, b := range map[string][]byte{"cut": b[:60], "Opus": file(1), "number not told": oggFLAC(0)} {
		if got, err := FLACHead(bytes.NewReader(b)); err == nil {
			t.Errorf("%s: %q", name, got)
		}
	}
}

func TestCheckChain(t *testing.T) {
	quiet := file(3)
	quiet[28+16] = 1
	film := made(first, 0, 9, 0, []byte{7}, "\x80theora")
	for name, test := range map[string]struct {
		b  []byte
		ok bool
	}{
		"one": {file(1), true}, "two": {slices.Concat(file(1), file(2)), true}, "junk": {[]byte("OggS junk"), true},
		"another gain": {slices.Concat(file(1), quiet), false}, "the same gain": {slices.Concat(quiet, quiet), true},
		"another codec":              {slices.Concat(file(1), made(first, 0, 8, 0, []byte{7}, "\x01vorbis")), false},
		"side by side":               {slices.Concat(file(1)[:47], quiet[:47], file(1)[47:], quiet[47:]), true},
		"side by side, then another": {slices.Concat(file(1)[:47], quiet[:47], file(1)[47:], quiet[47:], quiet), false},
		"a film":                     {slices.Concat(film, file(1)), true}, "cut": {slices.Concat(file(1), quiet)[:150], true},
	} {
		if err := CheckChain(bytes.NewReader(test.b), int64(len(test.b))); (err == nil) != test.ok || err != nil && !errors.Is(err, ErrUnlike) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// Whatever a file holds, with its checksums right: the tags that were written are read, tagging it again changes nothing,
// and its packets of sound stay.
func FuzzOgg(f *testing.F) {
	f.Add(file(1, "a=b"))
	f.Add(slices.Concat(file(1, "a=b"), file(2, "R128_TRACK_GAIN=1")))
	f.Add(edited(f, file(1), strings.Repeat("x", 1000)))
	f.Add(oggFLAC(1))
	id := "\x01vorbis" + string(make([]byte, 23))
	note := "\x03vorbis" + comment("a=b") + "\x01"
	f.Add(slices.Concat(made(first, 0, 1, 0, []byte{byte(len(id))}, id), made(0, 0, 1, 1, []byte{byte(len(note)), 9}, note+"\x05vorbisxx"), made(lastOf, 9, 1, 2, []byte{1}, "x")))
	f.Fuzz(func(t *testing.T, b []byte) {
		if len(b) > 1<<16 {
			return
		}
		for at := 0; at+pageHead <= len(b); { // or nothing would come past the checksum
			p := page(b[at:])
			if pageHead+int(p[pageHead-1]) > len(p) || p.size() > len(p) {
				break
			}
			p[:p.size()].seal()
			at += p.size()
		}
		CheckChain(bytes.NewReader(b), int64(len(b)))
		Comments(bytes.NewReader(b))
		FLACHead(bytes.NewReader(b))
		gains := tags.Gains{Track: tags.Loudness{Integrated: -20, Peak: 0}}
		var once, twice bytes.Buffer
		if err := Retag(&once, section(b), gains); err != nil {
			return
		}
		if err := Retag(&twice, section(once.Bytes()), gains); err != nil || !bytes.Equal(once.Bytes(), twice.Bytes()) {
			t.Fatalf("%v\n%q\n%q", err, once.Bytes(), twice.Bytes())
		}
		codec, c, err := Comments(bytes.NewReader(once.Bytes()))
		want := map[string]string{"opus": "R128_TRACK_GAIN=-768", "vorbis": "REPLAYGAIN_TRACK_GAIN=2.00 dB"}[codec]
		if err != nil || want == "" || !slices.Contains(c.Entries, want) {
			t.Fatalf("%s, %q, %v", codec, c.Entries, err)
		}
		if a, b := payload(b), payload(once.Bytes()); !bytes.Equal(a, b) {
			t.Fatalf("the sound was %q and is %q", a, b)
		}
	})
}

func section(b []byte) *io.SectionReader {
	return io.NewSectionReader(bytes.NewReader(b), 0, int64(len(b)))
}

// payload is what is on the pages behind the headers of each link.
func payload(b []byte) (all []byte) {
	missing := 0 // header packets that have not ended yet
	for in := newPages(bytes.NewReader(b)); ; {
		p, err := in.next()
		if err != nil {
			return all
		}
		switch c, _ := codecOf(p); {
		case p.has(first):
			missing = c.headers - 1
		case missing > 0:
			missing -= len(p.lacing()) - bytes.Count(p.lacing(), []byte{255})
		default:
			all = append(all, p.body()...)
		}
	}
}
