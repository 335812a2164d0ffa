package id3

import (
	"bytes"
	"encoding/binary"
	"slices"
	"strings"
	"testing"
)

// made returns a tag laid out as the informal standards say (ID3v2.2.0 3.1, 2.3.0 3.1, 2.4.0 3.1), around a body as given.
func made(version, flags byte, body ...[]byte) []byte {
	all := slices.Concat(body...)
	head := []byte{'I', 'D', '3', version, 0, flags, 0, 0, 0, byte(len(all) & 127)}
	head[8], head[7], head[6] = byte(len(all)>>7&127), byte(len(all)>>14&127), byte(len(all)>>21)
	if flags&0x10 != 0 {
		return slices.Concat(head, all, []byte("3DI"), head[3:])
	}
	return slices.Concat(head, all)
}

// framed returns a frame: 3 letters and 24 bits of size in 2.2, 32 bits in 2.3, 4 × 7 in 2.4.
func framed(version byte, id string, flags uint16, body string) []byte {
	n := len(body)
	var b []byte
	switch version {
	case 2:
		return append([]byte{id[0], id[1], id[2], byte(n >> 16), byte(n >> 8), byte(n)}, body...)
	case 3:
		b = binary.BigEndian.AppendUint32([]byte(id), uint32(n))
	case 4:
		b = append([]byte(id), byte(n>>21), byte(n>>14&127), byte(n>>7&127), byte(n&127))
	}
	return append(binary.BigEndian.AppendUint16(b, flags), body...)
}

// utf16le is a text of UTF-16 with its byte order mark, and an end.
func utf16le(s string) string {
	out := "\xFF\xFE"
	for _, c := range s {
		out += string([]byte{byte(c), 0})
	}
	return out + "\x00\x00"
}

const places = "\x00\x00\x01\x00\x00\x00\x02\x00" // of a chapter, in bytes of the file

// What is taken out is what a change of level makes wrong; all else stays as it is, byte for byte and in its order.
func TestLevelledFrames(t *testing.T) {
	big := strings.Repeat("\xFF\xFB\x90\x00picture", 3000)
	for _, test := range []struct {
		version  byte
		id, body string
		flags    uint16
		kept     bool
	}{
		{3, "TIT2", "\x00Title", 0, true},
		{3, "APIC", "\x00image/jpeg\x00\x03\x00" + big, 0, true},
		{4, "APIC", "\x00image/jpeg\x00\x03\x00" + big, 0, true},
		{2, "PIC", "\x00JPG\x03\x00" + big, 0, true},
		{3, "PRIV", "owner\x00" + big, 0, true},
		{3, "PRIV", "PeakValue\x00\x12\x34\x00\x00", 0, false},
		{3, "PRIV", "AverageLevel\x00\x12\x34\x00\x00", 0, false},
		{3, "GEOB", "\x00application/x\x00f\x00d\x00data", 0, true},
		{3, "UFID", "owner\x00id", 0, true},
		{3, "POPM", "a@b\x00\x80\x00\x00\x00\x01", 0, true},
		{3, "USLT", "\x01eng" + utf16le("replaygain") + utf16le("words"), 0, true},
		{3, "SYLT", "\x00eng\x01\x01\x00la\x00\x00\x00\x00\x01", 0, true},
		{3, "XYZW", "anything", 0, true},
		{3, "TLEN", "\x001234", 0, true},
		{3, "TENC", "\x00A station", 0, true},
		{3, "TSSE", "\x00An encoder", 0, false},
		{2, "TSS", "\x00An encoder", 0, false},
		{3, "TSIZ", "\x0099", 0, false},
		{4, "RVA2", "track\x00\x01\x00\x10\x00", 0, false},
		{3, "RVAD", "\x03\x10\x00\x01\x00\x01\x00\x01\x00\x01", 0, false},
		{2, "RVA", "\x03\x10\x00\x01\x00\x01\x00\x01\x00\x01", 0, false},
		{3, "XRVA", "track\x00\x01\x00\x10\x00", 0, false},
		{3, "RGAD", "\x00\x00\x00\x00\x00\x00\x00\x00", 0, false},
		{3, "MLLT", "\x00\x01", 0, false},
		{2, "MLL", "\x00\x01", 0, false},
		{4, "ASPI", "\x00\x01", 0, false},
		{4, "SEEK", "\x00\x00\x01\x00", 0, false},
		{3, "RBUF", "\x00\x00\x01\x00\x00\x00\x01\x00", 0, false},
		{3, "ETCO", "\x01\x03\x00\x00\x01\x00", 0, true},
		{4, "TXXX", "\x03replaygain_track_gain\x00-7 dB", 0, false},
		{3, "TXXX", "\x01" + utf16le("REPLAYGAIN_ALBUM_PEAK") + "\xFF\xFE1\x00", 0, false},
		{4, "TXXX", "\x02\x00G\x00A\x00I\x00N\x00\x00\x001", 0, false},
		{2, "TXX", "\x00replaygain_track_gain\x00-7 dB", 0, false},
		{3, "TXXX", "\x00Catalogue\x00a gain", 0, true},
		{3, "TXXX", "", 0, true},
		{3, "COMM", "\x00engplayNORM\x00 0000", 0, false},
		{2, "COM", "\x00engplaySMPB\x00 0000", 0, false},
		{3, "COMM", "\x00engListen again\x00why", 0, true},
		{3, "COMM", "\x00eng\x00SMPB", 0, true},
		{4, "TXXX", "\x07\x00replaygain_track_gain\x00-7 dB", 0x40, false},                   // grouped
		{4, "TXXX", "\x00\x00\x00\x1Dreplaygain_track_gain\x00-7 dB", 0x09, true},            // compressed, or so it says
		{3, "TXXX", "\x05\x00replaygain_track_gain\x00-7 dB", 0x40, true},                    // encrypted
		{4, "TXXX", "\x00\x00\x00\x1D\x00replaygain_track_gain\x00-7 dB \xFF\x00", 3, false}, // unsynchronised, with its length
		{3, "TT2\x00", "\x00Title", 0, true},
		{3, "CHAP", "one\x00\x00\x00\x00\x00\x00\x00\x10\x00\xFF\xFF\xFF\xFF\xFF\xFF\xFF\xFF", 0, true},
		{3, "CTOC", "toc\x00\x03\x01one\x00", 0, true},
	} {
		before, after := framed(test.version, "TPE1", 0, "\x00A"), framed(test.version, "TALB", 0, "\x00B")
		f := framed(test.version, test.id, test.flags, test.body)
		source := made(test.version, 0, before, f, after, make([]byte, 20))
		want := source
		if !test.kept {
			want = made(test.version, 0, before, after, make([]byte, 20))
		}
		if got, _ := Levelled(source, nil); !bytes.Equal(got, want) {
			t.Errorf("2.%d %s %.30q: got %.200q", test.version, test.id, test.body, got)
		}
		if got, _ := Levelled(made(test.version, 0, f), nil); (len(got) > 0) != test.kept {
			t.Errorf("2.%d %s alone: %.200q", test.version, test.id, got)
		}
	}
}

// A chapter keeps its times and what is inside it; where it was in the file is marked unused, in every way it can be written.
func TestChapters(t *testing.T) {
	inside := string(framed(3, "TIT2", 0, "\x00First")) + string(framed(3, "APIC", 0, "\x00image/png\x00\x00\x00\xFF\x00\xFF"))
	times := "one\x00\x00\x00\x00\x00\x00\x00\xFF\x00"
	const none = "\xFF\xFF\xFF\xFF\xFF\xFF\xFF\xFF"
	unsync := func(s string) string { return strings.ReplaceAll(s, "\xFF", "\xFF\x00") } // more than is needed, and allowed
	for name, test := range map[string]struct{ source, want []byte }{
		"2.3": {made(3, 0, framed(3, "CHAP", 0, times+places+inside), make([]byte, 9)), made(3, 0, framed(3, "CHAP", 0, times+none+inside), make([]byte, 9))},
		"2.3, unsynchronised": {made(3, 0x80, []byte(unsync(string(framed(3, "CHAP", 0, times+places+inside))))),
			made(3, 0, framed(3, "CHAP", 0, times+none+inside))},
		"2.4, unsynchronised with its length": {made(4, 0x80, framed(4, "CHAP", 3, "\x00\x00\x00\x01"+unsync(times+places))),
			made(4, 0x80, framed(4, "CHAP", 3, "\x00\x00\x00\x01"+unsync(times+none)))},
		"2.4 with a footer": {made(4, 0x10, framed(4, "CHAP", 0, times+places)), made(4, 0x10, framed(4, "CHAP", 0, times+none))},
		"cut short":         {made(4, 0, framed(4, "CHAP", 0, times+places[:7])), made(4, 0, framed(4, "CHAP", 0, times+places[:7]))},
	} {
		if got, _ := Levelled(test.source, nil); !bytes.Equal(got, test.want) {
			t.Errorf("%s:\ngot  %q\nwant %q", name, got, test.want)
		}
	}
}

// A tag in which something changes is written anew in its own version, whatever it looked like.
func TestRenderedAnew(t *testing.T) {
	gone := func(v byte) []byte { return framed(v, "TXXX", 0, "\x00replaygain_track_gain\x00-7 dB") }
	title := func(v byte) []byte { return framed(v, "TIT2", 0, "\x01\xFF\xFET\x00") }
	long := framed(3, "PRIV", 0, "x\x00"+strings.Repeat("a", 300)) // its size, of 32 bits, is none of 4 × 7
	ext3 := []byte{0, 0, 0, 6, 0, 0, 0, 0, 0, 5}
	ext4 := []byte{0, 0, 0, 6, 1, 0}
	for name, test := range map[string]struct{ source, want []byte }{
		"extended header of 2.3":            {made(3, 0x40, ext3, gone(3), title(3), make([]byte, 5)), made(3, 0, title(3), make([]byte, 5))},
		"extended header of 2.4":            {made(4, 0x40, ext4, gone(4), title(4)), made(4, 0, title(4))},
		"no extended header where told":     {made(3, 0x40, gone(3), title(3)), made(3, 0, title(3))},
		"unsynchronised 2.3":                {made(3, 0x80, gone(3), framed(3, "TIT2", 0, "\x01\xFF\xFET\x00")[:11], []byte("\xFF\x00\xFET\x00")), made(3, 0, title(3))},
		"2.4 with the sizes of 2.3":         {made(4, 0, gone(4), long, title(4), make([]byte, 5)), made(4, 0, framed(4, "PRIV", 0, string(long[10:])), title(4), make([]byte, 5))},
		"something unreadable at the end":   {made(4, 0, gone(4), title(4), []byte("APIC\x00\x00\x7F\x7F\x00\x00image")), made(4, 0, title(4))},
		"several tags, and junk behind":     {slices.Concat(made(4, 0, gone(4), title(4)), made(3, 0, title(3)), make([]byte, 77)), slices.Concat(made(4, 0, title(4)), made(3, 0, title(3)))},
		"a version yet to come":             {made(5, 0, gone(4)), made(5, 0, gone(4))},
		"2.2 compressed":                    {made(2, 0x40, gone(4)), made(2, 0x40, gone(4))},
		"nothing that has to go":            {made(3, 0xC0, ext3, title(3), []byte("rubbish")), made(3, 0xC0, ext3, title(3), []byte("rubbish"))},
		"an APEv2 tag in front":             {madeAPE(true, "Title", "T", "Replaygain_Track_Gain", "x"), madeAPE(true, "Title", "T")},
		"an APEv2 tag with nothing to keep": {madeAPE(true, "FILE_GAIN_UNDO", "x"), nil},
		"longer than the file":              {made(3, 0, title(3))[:15], nil},
	} {
		if got, _ := Levelled(test.source, nil); !bytes.Equal(got, test.want) {
			t.Errorf("%s:\ngot  %q\nwant %q", name, got, test.want)
		}
	}
}

// madeAPE is an APEv2 tag of names and texts, as the public description of the format has it.
func madeAPE(header bool, items ...string) []byte {
	var body []byte
	for i := 0; i < len(items); i += 2 {
		body = binary.LittleEndian.AppendUint32(body, uint32(len(items[i+1])))
		body = append(body, "\x00\x00\x00\x00"+items[i]+"\x00"+items[i+1]...)
	}
	edge := func(flags uint32) []byte {
		b := []byte("APETAGEX")
		for _, v := range []uint32{2000, uint32(len(body) + 32), uint32(len(items) / 2), flags} {
			b = binary.LittleEndian.AppendUint32(b, v)
		}
		return append(b, make([]byte, 8)...)
	}
	if !header {
		return append(body, edge(0)...)
	}
	return slices.Concat(edge(1<<31|1<<29), body, edge(1<<31))
}

// Behind the sound, too: tags are kept in their order, zeros around them are not.
func TestLevelledTail(t *testing.T) {
	v1 := append([]byte("TAGA song"), make([]byte, 119)...)
	plus := append([]byte("TAG+A song"), make([]byte, 217)...)
	words := "LYRICSBEGININD0000200ETT00004Song"
	lyrics := []byte(words + "000033LYRICS200")
	v24 := func(frames ...[]byte) []byte { return made(4, 0x10, frames...) }
	title, gain := framed(4, "TIT2", 0, "\x00T"), framed(4, "TXXX", 0, "\x00replaygain_track_gain\x00-7 dB")
	picture := "\x00\xFF\x00JPEG"
	zeros := make([]byte, 99)
	source := slices.Concat(zeros, madeAPE(true, "Title", "T", "REPLAYGAIN_TRACK_GAIN", "x", "Cover Art (Front)", picture), zeros, v24(title, gain), lyrics, plus, v1, zeros)
	want := slices.Concat(madeAPE(true, "Title", "T", "Cover Art (Front)", picture), v24(title), lyrics, plus, v1)
	if _, got := Levelled(nil, source); !bytes.Equal(got, want) {
		t.Errorf("got  %q\nwant %q", got, want)
	}
	if _, got := Levelled(nil, want); !bytes.Equal(got, want) {
		t.Errorf("again: %q", got)
	}
	sound := bytes.Repeat([]byte("sound"), 50_000)
	start, err := TailStart(bytes.NewReader(slices.Concat(sound, source[99:])), 5, int64(len(sound)+len(source)-99))
	if err != nil || start != int64(len(sound)) {
		t.Errorf("it begins at %d, want %d: %v", start, len(sound), err)
	}
}
