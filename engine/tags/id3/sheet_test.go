package id3

import (
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"evenshelf/engine/tags"
)

const ms = time.Millisecond

// mutagen runs a script with mutagen, a library of tags that has nothing to do with this one, on a file.
func mutagen(t testing.TB, script, path string, args ...string) []byte {
	t.Helper()
	const begin = "import sys, json\nfrom mutagen.id3 import ID3, Frames\nglobals().update(Frames)\npath = sys.argv[1]\n"
	var stderr bytes.Buffer
	cmd := exec.Command("/usr/bin/python3", append([]string{"-c", begin + script, path}, args...)...)
	cmd.Stderr = &stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("this test needs python3-mutagen: %v\n%s", err, &stderr)
	}
	return out
}

func saved(t testing.TB, b []byte) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "tag.mp3")
	if err := os.WriteFile(path, b, 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func field(name string, values ...string) tags.Field { return tags.Field{Name: name, Values: values} }

// full is a sheet with something of everything.
func full() tags.Sheet {
	return tags.Sheet{
		Fields: []tags.Field{
			field("TITLE", "Läufer №1"), field("ARTIST", "One/Two", "Three"), field("ALBUM", "Album"), field("ALBUMARTIST", "Several"),
			field("TRACKNUMBER", "3"), field("TRACKTOTAL", "12"), field("DISCNUMBER", "1"), field("DATE", "2020-03"), field("GENRE", "Speech", "Talk (live)"),
			field("COMPOSER", "C1", "C2"), field("COMMENT", "a\nb", "second"), field("COMMENT:LISTEN AGAIN", "why"), field("LYRICS", "la\nla"),
			field("ISRC", "XX1230000001"), field("BPM", "120"), field("COPYRIGHT", "2020 somebody"), field("LANGUAGE", "deu"),
			field("LABEL", "A label"), field("PUBLISHER", "A publisher"), field("ORIGINALDATE", "sometime"), field("WEBSITE", "https://example.org/"),
			field("URL", "https://example.org/a", "https://example.org/b"), field("PRODUCER", "P"), field("PERFORMER", "Q (viola)", "R"),
			field("MUSICBRAINZ_TRACKID", "0-1-2"), field("MUSICBRAINZ_ALBUMID", "3-4"), field("CATALOGUE", "A 1", "ä 2"), field("UFID:HTTP://X", "id"),
		},
		Pictures: []tags.Picture{
			{Kind: tags.FrontCover, MIME: "image/jpeg", Description: "front", Data: []byte("\xFF\xD8\xFF\x00\xFF\xFB\x90")},
			{Kind: 4, MIME: "image/png", Data: []byte("\x89PNG back")}, {Kind: 0, MIME: "image/png", Data: []byte("\x89PNG other")},
		},
		Chapters: []tags.Chapter{{0, 1500 * ms, "First"}, {1500 * ms, 4000 * ms, "Zweites Stück"}, {5000 * ms, 6000 * ms, ""}},
	}
}

// What is written, mutagen reads, in the frames that the standard has for it.
func TestWriteSheetReadByMutagen(t *testing.T) {
	s := full()
	s.Fields = append(s.Fields, field("REPLAYGAIN_TRACK_GAIN", "-7 dB"))
	s.Fields = append(s.Fields, field("RELEASEDATE", "2020-03-01 07:00:00Z"))
	slices.Reverse(s.Pictures) // the front cover comes first all the same
	const script = `
t = ID3(path, translate=False)
d = {k: f.text for k, f in t.items() if hasattr(f, "text")}
d = {k: [str(x) for x in v] if isinstance(v, list) else [v] for k, v in d.items()}
d.update({k: [f.url] for k, f in t.items() if hasattr(f, "url")})
d.update({k: [f.data.decode()] for k, f in t.items() if k.startswith("UFID")})
d.update({k: ["%s=%s" % tuple(p) for p in f.people] for k, f in t.items() if hasattr(f, "people")})
d["pictures"] = ["%d %s %s %s" % (f.type, f.mime, f.desc.strip(), f.data.hex()) for f in t.getall("APIC")]
d["chapters"] = ["%s %d %d %s" % (f.element_id, f.start_time, f.end_time, f.sub_frames.get("TIT2", "")) for f in t.getall("CHAP")]
d["toc"] = [str(int(f.flags)) + " " + " ".join(f.child_element_ids) for f in t.getall("CTOC")]
d["version"] = [str(t.version), str(len(t.unknown_frames))]
print(json.dumps(d))`
	var got map[string][]string
	if err := json.Unmarshal(mutagen(t, script, saved(t, WriteSheet(s))), &got); err != nil {
		t.Fatal(err)
	}
	want := map[string][]string{
		"TIT2": {"Läufer №1"}, "TPE1": {"One/Two", "Three"}, "TALB": {"Album"}, "TPE2": {"Several"}, "TRCK": {"3/12"}, "TPOS": {"1"},
		"TDRC": {"2020-03"}, "TDRL": {"2020-03-01 07:00:00"}, "TCON": {"Speech", "Talk (live)"}, "TCOM": {"C1", "C2"}, "COMM::deu": {"a\nb"}, "COMM: :deu": {"second"},
		"COMM:LISTEN AGAIN:deu": {"why"}, "USLT::deu": {"la\nla"}, "TSRC": {"XX1230000001"}, "TBPM": {"120"}, "TCOP": {"2020 somebody"}, "TLAN": {"deu"},
		"TPUB": {"A label"}, "TXXX:PUBLISHER": {"A publisher"}, "TXXX:ORIGINALDATE": {"sometime"}, "WOAR": {"https://example.org/"},
		"WXXX:": {"https://example.org/a"}, "WXXX: ": {"https://example.org/b"}, "TIPL": {"producer=P"}, "TMCL": {"viola=Q", "=R"},
		"UFID:http://musicbrainz.org": {"0-1-2"}, "TXXX:MusicBrainz Album Id": {"3-4"}, "TXXX:CATALOGUE": {"A 1", "ä 2"}, "UFID:HTTP://X": {"id"},
		"pictures": {"3 image/jpeg front ffd8ff00fffb90", "0 image/png  89504e47206f74686572", "4 image/png  89504e47206261636b"},
		"chapters": {"c1 0 1500 First", "c2 1500 4000 Zweites Stück", "c3 5000 6000 "}, "toc": {"3 c1 c2 c3"}, "version": {"(2, 4, 0)", "0"},
	}
	got["WOAR"] = got["WOAR:https://example.org/"] // mutagen allows several
	delete(got, "WOAR:https://example.org/")
	for name := range want {
		if name == "pictures" {
			slices.Sort(got[name][1:]) // mutagen sorts by key
			slices.Sort(want[name][1:])
		}
		if !slices.Equal(got[name], want[name]) {
			t.Errorf("%s is %q, want %q", name, got[name], want[name])
		}
		delete(got, name)
	}
	if len(got) > 0 {
		t.Errorf("more: %q", got)
	}
}

// More than 255 chapters need tables of their own, which the first one names.
func TestManyChapters(t *testing.T) {
	var s tags.Sheet
	for i := range 600 {
		s.Chapters = append(s.Chapters, tags.Chapter{Start: time.Duration(i) * time.Second, Title: fmt.Sprint(i)})
	}
	got := string(mutagen(t, `
t = ID3(path)
top = [f for f in t.getall("CTOC") if f.flags & 2]
parts = [t["CTOC:" + c] for c in top[0].child_element_ids]
chapters = [t["CHAP:" + c] for p in parts for c in p.child_element_ids]
print(len(top), len(parts), len(chapters), chapters[299].start_time, chapters[299].end_time, chapters[599].end_time)`, saved(t, WriteSheet(s))))
	if got != "1 3 600 299000 300000 4294967295\n" { // the last: not used
		t.Error(got)
	}
}

// What mutagen writes in 2.3 and 2.4 is read, in words of a sheet; ID3v1 and APEv2 add what is missing.
func TestReadSheetByMutagen(t *testing.T) {
	const script = `
from mutagen.apev2 import APEv2, APEValue, BINARY
version = int(sys.argv[2])
t = ID3()
for f in [
    TIT2(encoding=1, text="Läufer"), TPE1(encoding=3, text=["Jane", "Joan"]), TPE2(encoding=2, text="AC/DC/EF"), TRCK(encoding=0, text="3/12"), TPOS(encoding=0, text="1/2"),
    TDRC(encoding=0, text="2020-03-01 12:30:00"), TDOR(encoding=0, text="1999"), TCON(encoding=0, text=["(17)(RX)", "Own"]), TSRC(encoding=0, text="XX1230000001"), TBPM(encoding=0, text="120"),
    COMM(encoding=1, lang="eng", desc="", text="a\nb"), COMM(encoding=0, lang="deu", desc="Listen again", text="c"), COMM(encoding=0, lang="eng", desc="iTunNORM", text="0001"),
    USLT(encoding=1, lang="eng", desc="d", text="wörds"), TXXX(encoding=1, desc="Catalogue", text=["A 1", "A 2"]), TXXX(encoding=0, desc="replaygain_track_gain", text="-7 dB"),
    TXXX(encoding=0, desc="MusicBrainz Album Id", text="3-4"), TXXX(encoding=0, desc="comment", text="a\nb"), UFID(owner="http://musicbrainz.org", data=b"0-1"), UFID(owner="http://x", data=b"\0\1"),
    WXXX(encoding=0, desc="", url="http://w"), WOAR(url="http://o"), TIPL(encoding=0, people=[["producer", "P"], ["tea", "Q"]]), POPM(email="a@b", rating=128, count=3), TLEN(encoding=0, text="99"), TSSE(encoding=0, text="x"),
    APIC(encoding=0, mime="image/png", type=4, desc="back", data=b"\x89PNG\xff\x00"), APIC(encoding=1, mime="image/jpg", type=3, desc="frönt", data=b"\xff\xd8\xff\xe0\x00\x00"), APIC(encoding=0, mime="-->", type=0, desc="", data=b"http://p"),
    CTOC(element_id="toc", flags=3, child_element_ids=["b", "a"], sub_frames=[TIT2(encoding=0, text="Contents")]),
    CHAP(element_id="b", start_time=1000, end_time=2**32 - 1, start_offset=0, end_offset=0, sub_frames=[TIT2(encoding=1, text="Zwö")]),
    CHAP(element_id="a", start_time=0, end_time=1000, start_offset=0, end_offset=0, sub_frames=[WXXX(encoding=0, desc="", url="http://c"), TIT2(encoding=0, text="One")]),
]: t.add(f)
if version == 3: t.update_to_v23()
a = APEv2()
a["Title"], a["Conductor"], a["Track"], a["Year"] = "Another", ["D", "Ë"], "9", "1800"
a.save(path)
t.save(path, v1=0, v2_version=version)
open(path, "ab").write(b"TAG" + b"Old title".ljust(30, b"\0") + b"Old \xe4".ljust(30) + b"Old album".ljust(30, b"\0") + b"1900" + b"Old".ljust(28, b"\0") + b"\0\7" + bytes([101]))`
	for version := 3; version <= 4; version++ {
		path := saved(t, nil)
		mutagen(t, script, path, fmt.Sprint(version))
		b, err := os.ReadFile(path)
		if err != nil {
			t.Fatal(err)
		}
		n := HeadLength(b)
		want := tags.Sheet{Pictures: []tags.Picture{
			{Kind: 3, MIME: "image/jpeg", Description: "frönt", Data: []byte("\xFF\xD8\xFF\xE0\x00\x00")}, {Kind: 4, MIME: "image/png", Description: "back", Data: []byte("\x89PNG\xFF\x00")},
		}, Chapters: []tags.Chapter{{0, 1000 * ms, "One"}, {1000 * ms, 0, "Zwö"}}}
		for _, f := range []tags.Field{
			field("TITLE", "Läufer"), field("ARTIST", "Jane", "Joan"), field("ALBUMARTIST", "AC/DC/EF"), field("TRACKNUMBER", "3"), field("TRACKTOTAL", "12"), field("DISCNUMBER", "1"), field("DISCTOTAL", "2"),
			field("ORIGINALDATE", "1999"), field("GENRE", "Rock", "Remix", "Own"), field("ISRC", "XX1230000001"), field("BPM", "120"), field("COMMENT", "a\nb"), field("COMMENT:LISTEN AGAIN", "c"), field("LYRICS", "wörds"),
			field("CATALOGUE", "A 1", "A 2"), field("MUSICBRAINZ_ALBUMID", "3-4"), field("MUSICBRAINZ_TRACKID", "0-1"), field("URL", "http://w"), field("WEBSITE", "http://o"), field("PRODUCER", "P"), field("PERFORMER", "Q (tea)"),
			field("DATE", map[int]string{3: "2020-03-01T12:30", 4: "2020-03-01T12:30:00"}[version]), field("CONDUCTOR", "D", "Ë"), field("ALBUM", "Old album"),
		} {
			want.Fields = append(want.Fields, f)
		}
		got := ReadSheet(b[:n], b[n:])
		if version == 3 { // which has a separator of mutagen's own for lists that are none of people
			for i, f := range got.Fields {
				switch f.Name {
				case "CATALOGUE", "GENRE":
					got.Fields[i].Values = strings.Split(f.Values[0], "/")
				}
			}
		}
		compare(t, got, want)
	}
}

// compare fails unless two sheets say the same, whatever the order of their fields.
func compare(t testing.TB, got, want tags.Sheet) {
	t.Helper()
	byName := func(a, b tags.Field) int { return strings.Compare(a.Name, b.Name) }
	slices.SortFunc(got.Fields, byName)
	slices.SortFunc(want.Fields, byName)
	for _, pair := range [][2][]tags.Field{{got.Fields, want.Fields}, {want.Fields, got.Fields}} {
		for _, f := range pair[0] {
			if !slices.ContainsFunc(pair[1], func(g tags.Field) bool { return reflect.DeepEqual(f, g) }) {
				t.Errorf("%q is not in\n%q", f, pair[1])
			}
		}
	}
	if !slices.Equal(got.Chapters, want.Chapters) || len(got.Pictures) != len(want.Pictures) || len(got.Pictures) > 0 && !reflect.DeepEqual(got.Pictures, want.Pictures) {
		t.Errorf("%+v %+v,\nwant %+v %+v", got.Pictures, got.Chapters, want.Pictures, want.Chapters)
	}
}

// Frames laid out by hand as the informal standards say (ID3v2.2.0, 4; 2.3.0, 4; 2.4.0, 4).
func TestReadSheetByHand(t *testing.T) {
	for name, test := range map[string]struct {
		tag  []byte
		want []tags.Field
	}{
		"2.2": {made(2, 0, framed(2, "TT2", 0, "\x01"+utf16le("Ti")), framed(2, "TP1", 0, "\x00Jane/Joan"), framed(2, "TRK", 0, "\x003/4"), framed(2, "TYE", 0, "\x002001"),
			framed(2, "COM", 0, "\x00eng\x00words"), framed(2, "ULT", 0, "\x00engd\x00song"), framed(2, "TXX", 0, "\x00Own\x00x"), framed(2, "WXX", 0, "\x00d\x00http://w")),
			[]tags.Field{field("TITLE", "Ti"), field("ARTIST", "Jane", "Joan"), field("TRACKNUMBER", "3"), field("TRACKTOTAL", "4"), field("DATE", "2001"), field("COMMENT", "words"), field("LYRICS", "song"), field("OWN", "x"), field("URL:D", "http://w")}},
		"2.3": {made(3, 0, framed(3, "TYER", 0, "\x001999"), framed(3, "TDAT", 0, "\x000112"), framed(3, "TPE1", 0, "\x00AC/DC"), framed(3, "TCON", 0, "\x00(4)(101)((x)"), framed(3, "TIT2", 0, "\x00\x80 10"), framed(3, "IPLS", 0, "\x00mix\x00M\x00")),
			[]tags.Field{field("DATE", "1999-12-01"), field("ARTIST", "AC/DC"), field("GENRE", "Disco", "Speech", "(x)"), field("TITLE", "€ 10"), field("MIXER", "M")}},
		"2.4": {made(4, 0, framed(4, "TPE1", 0, "\x03A/B\x00C\x00"), framed(4, "TCON", 0, "\x0317\x00Own"), framed(4, "TIT2", 0, "\x02\x00A\x00\x00"), framed(4, "TABC", 0, "\x00z"), framed(4, "TXXX", 0, "\x03\x00unnamed")),
			[]tags.Field{field("ARTIST", "A/B", "C"), field("GENRE", "Rock", "Own"), field("TITLE", "A"), field("TABC", "z")}},
		"in a row": {slices.Concat(made(3, 0, framed(3, "TIT2", 0, "\x00first")), made(4, 0, framed(4, "TIT2", 0, "\x00second"), framed(4, "TALB", 0, "\x00album"))),
			[]tags.Field{field("TITLE", "first"), field("ALBUM", "album")}},
		"APEv2 in front": {madeAPE(true, "Title", "T", "Disc", "1/2", "REPLAYGAIN_TRACK_GAIN", "x"), []tags.Field{field("TITLE", "T"), field("DISCNUMBER", "1"), field("DISCTOTAL", "2")}},
	} {
		t.Run(name, func(t *testing.T) { compare(t, ReadSheet(test.tag, nil), tags.Sheet{Fields: test.want}) })
	}
	pic := made(2, 0, framed(2, "PIC", 0, "\x00PNG\x03d\x00\x89PNG"))
	compare(t, ReadSheet(pic, nil), tags.Sheet{Pictures: []tags.Picture{{Kind: 3, MIME: "image/png", Description: "d", Data: []byte("\x89PNG")}}})
}

// A sheet that is written reads as it was.
func TestSheetThereAndBack(t *testing.T) {
	compare(t, ReadSheet(WriteSheet(full()), nil), full())
	words := rapid.StringMatching(`[A-Za-zäßЖ日][A-Za-z /äßЖ日\n]{0,20}[A-Za-zäßЖ日]`)
	known := []string{"TITLE", "ARTIST", "COMPOSER", "COMMENT", "COMMENT:Ä X", "LYRICS", "LABEL", "DATE", "MIXER", "PERFORMER", "RELEASETYPE", "TIT2", "COMM", "TXXX", "TRACKTOTAL", "URL", "WEBSITE", "INITIALKEY", "TABC"}
	rapid.Check(t, func(t *rapid.T) {
		var s tags.Sheet
		names := rapid.OneOf(rapid.SampledFrom(known), rapid.StringMatching(`[A-Z][A-Z0-9 _:]{0,8}[A-Z]`).Filter(func(n string) bool { return !tags.Stale(n) && n[len(n)-1] != ':' && (frameOf[n] == "" || nameOf[frameOf[n]] == n) }))
		for _, name := range rapid.SliceOfNDistinct(names, 0, 12, rapid.ID[string]).Draw(t, "names") {
			s.Add(name, rapid.SliceOfNDistinct(words, 1, 4, rapid.ID[string]).Draw(t, "values")...)
		}
		for range rapid.IntRange(0, 4).Draw(t, "pictures") {
			s.Pictures = append(s.Pictures, tags.Picture{
				Kind: rapid.IntRange(0, 20).Draw(t, "kind"), MIME: "image/png", Description: rapid.SampledFrom([]string{"", "a", "ä"}).Draw(t, "description"),
				Data: rapid.SliceOfN(rapid.Byte(), 1, 50).Draw(t, "data"),
			})
		}
		at := time.Duration(0)
		for range rapid.IntRange(0, 300).Draw(t, "chapters") {
			start := at
			at += time.Duration(rapid.IntRange(1, 9999).Draw(t, "length")) * ms
			s.Chapters = append(s.Chapters, tags.Chapter{Start: start, End: at, Title: words.Draw(t, "title")})
		}
		s.Settle()
		got := ReadSheet(WriteSheet(s), nil)
		for _, list := range [][]tags.Field{got.Fields, s.Fields} {
			slices.SortFunc(list, func(a, b tags.Field) int { return strings.Compare(a.Name, b.Name) })
		}
		if len(got.Fields)+len(s.Fields) > 0 && !reflect.DeepEqual(got.Fields, s.Fields) {
			t.Fatalf("%q,\nwant %q", got.Fields, s.Fields)
		}
		if len(got.Pictures)+len(s.Pictures) > 0 && !reflect.DeepEqual(got.Pictures, s.Pictures) || !slices.Equal(got.Chapters, s.Chapters) {
			t.Fatalf("%v %v,\nwant %v %v", got.Pictures, got.Chapters, s.Pictures, s.Chapters)
		}
	})
}

// Whatever the bytes: nothing panics, no more comes out than went in, and what was read can be written and read again.
func FuzzSheet(f *testing.F) {
	f.Add(WriteSheet(full()), []byte{})
	f.Add(made(2, 0, framed(2, "PIC", 0, "\x00JPG\x03\x00x"), framed(2, "TCO", 0, "\x00(1)(2)((")), append([]byte("TAGA song"), make([]byte, 119)...))
	f.Add(made(3, 0, framed(3, "TPE1", 0, "\x00Jane/Joan"), framed(3, "CHAP", 0, "c\x00"+strings.Repeat("\x01", 16)), framed(3, "IPLS", 0, "\x01a")), madeAPE(true, "Cover Art (Front)", "f\x00x", "Track", "1/"))
	f.Fuzz(func(t *testing.T, head, tail []byte) {
		if len(head)+len(tail) > 1<<16 {
			return
		}
		s := ReadSheet(head, tail)
		size := 0
		for _, field := range s.Fields {
			for _, v := range field.Values {
				size += len(v)
			}
		}
		for _, p := range s.Pictures {
			size += len(p.Data)
		}
		if size > 30*(len(head)+len(tail)) { // a genre has 21 letters at most, and a number has one or more
			t.Fatalf("%d bytes out of %d", size, len(head)+len(tail))
		}
		if again := ReadSheet(WriteSheet(s), nil); len(again.Pictures) != len(s.Pictures) || len(again.Chapters) != len(s.Chapters) {
			t.Fatalf("%+v became %+v", s, again)
		}
	})
}
