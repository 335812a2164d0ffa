package media

import (
	"encoding/json"
	"errors"
	"os"
	"path/filepath"
	"reflect"
	"slices"
	"strings"
	"testing"
	"time"

	"evenshelf/engine/audio"
	"evenshelf/engine/tags"
	"evenshelf/engine/tags/id3"
)

const ms = time.Millisecond

func field(name string, values ...string) tags.Field { return tags.Field{Name: name, Values: values} }

func chapter(start, end time.Duration, title string) tags.Chapter {
	return tags.Chapter{Start: start, End: end, Title: title}
}

// readSheet reads the sheet of a file.
func readSheet(t testing.TB, path string) tags.Sheet {
	t.Helper()
	src, err := openTags(path)
	if err != nil {
		t.Fatal(err)
	}
	defer src.close()
	s, ok := src.sheet()
	if !ok {
		t.Fatalf("%s has no sheet", path)
	}
	return s
}

// sameSheet fails unless two sheets say the same, whatever the order of their fields.
func sameSheet(t testing.TB, got, want tags.Sheet) {
	t.Helper()
	byName := func(a, b tags.Field) int { return strings.Compare(a.Name, b.Name) }
	got.Fields, want.Fields = slices.SortedFunc(slices.Values(got.Fields), byName), slices.SortedFunc(slices.Values(want.Fields), byName)
	if !reflect.DeepEqual(got.Fields, want.Fields) {
		t.Errorf("fields %q,\nwant %q", got.Fields, want.Fields)
	}
	if len(got.Pictures)+len(want.Pictures) > 0 && !reflect.DeepEqual(got.Pictures, want.Pictures) {
		t.Errorf("pictures %+v,\nwant %+v", got.Pictures, want.Pictures)
	}
	if !slices.Equal(got.Chapters, want.Chapters) {
		t.Errorf("chapters %v,\nwant %v", got.Chapters, want.Chapters)
	}
}

// What a WAV says in its own chunks, laid out by hand (RIFF, 1991; EBU Tech 3285; AES46), is read; its ID3v2 tag counts more.
func TestWAVSheet(t *testing.T) {
	format, data := plainFmt(1, 1, 8000, 16, 2), riffChunk("data", strings.Repeat("\x00", 32_000)) // 2 s
	info := riffChunk("LIST", "INFO"+riffChunk("INAM", "Name \x00\x00")+riffChunk("IART", "L\xE4ufer")+riffChunk("ITRK", "3/4\x00")+riffChunk("ICMT", "wörds\x00")+riffChunk("ISFT", "a program")+riffChunk("IXYZ", "what"))
	cue := func(id, at int) string {
		return u32(int64(id)) + u32(0) + "data" + u32(0) + u32(0) + u32(int64(at))
	}
	cues := riffChunk("cue ", u32(3)+cue(7, 8000)+cue(2, 0)+cue(9, 12000))
	adtl := riffChunk("LIST", "adtl"+riffChunk("labl", u32(7)+"Second\x00")+riffChunk("note", u32(2)+"Start\x00")+riffChunk("ltxt", u32(7)+u32(2000)+"rgn "+u64(0)))
	id3v2 := riffChunk("id3 ", string(id3.WriteSheet(tags.Sheet{Fields: []tags.Field{field("TITLE", "Title"), field("ARTIST", "One", "Two")}})))
	cart := riffChunk("cart", "0101"+"Cart title"+strings.Repeat("\x00", 54)+"Cart artist"+strings.Repeat("\x00", 53)+strings.Repeat("\x00", 1916))
	chapters := []tags.Chapter{chapter(0, 1000*ms, "Start"), chapter(1000*ms, 1250*ms, "Second"), chapter(1500*ms, 2000*ms, "")}
	own := []tags.Field{field("TITLE", "Name"), field("ARTIST", "Läufer"), field("TRACKNUMBER", "3"), field("TRACKTOTAL", "4"), field("COMMENT", "wörds"), field("IXYZ", "what")}
	broadcast := []tags.Field{field("DESCRIPTION", "Evening talk"), field("ORIGINATOR", strings.Repeat("O", 32)), field("ORIGINATOR_REFERENCE", strings.Repeat("O", 32)), field("DATE", "2026-12-01")}
	for name, test := range map[string]struct {
		chunks []string
		want   tags.Sheet
	}{
		"INFO and cue points": {[]string{info, format, data, adtl, cues}, tags.Sheet{Fields: own, Chapters: chapters}},
		"ID3v2 first": {[]string{info, format, data, id3v2}, tags.Sheet{Fields: []tags.Field{
			field("TITLE", "Title"), field("ARTIST", "One", "Two"), field("TRACKNUMBER", "3"), field("TRACKTOTAL", "4"), field("COMMENT", "wörds"), field("IXYZ", "what")}}},
		"bext":                 {[]string{riffChunk("bext", bextOf(1, strings.Repeat("\x00", 254))), format, data}, tags.Sheet{Fields: broadcast}},
		"cart":                 {[]string{cart, format, data}, tags.Sheet{Fields: []tags.Field{field("TITLE", "Cart title"), field("ARTIST", "Cart artist")}}},
		"nothing":              {[]string{format, data}, tags.Sheet{}},
		"broken in every list": {[]string{riffChunk("bext", "short"), riffChunk("cart", ""), format, data, riffChunk("cue ", u32(-1&0xFFFFFFFF)+"123"), riffChunk("LIST", "adtl"+"labl"+u32(99)+"ab"), riffChunk("LIST", "INFO"+"INAM"+u32(0xFFFFFFFF)+"Na"), riffChunk("id3 ", "ID3"), riffChunk("LIST", "")}, tags.Sheet{Fields: []tags.Field{field("TITLE", "Na")}}},
	} {
		t.Run(name, func(t *testing.T) { sameSheet(t, readSheet(t, save(t, "a.wav", riffFile(test.chunks...))), test.want) })
	}
}

// What an AIFF says in its own chunks, laid out by hand (AIFF 1.3), is read.
func TestAIFFSheet(t *testing.T) {
	mark := iffChunk("MARK", b16(2)+b16(5)+b32(4000)+"\x06Second\x00"+b16(1)+b32(0)+"\x05Start")
	comt := iffChunk("COMT", b16(2)+b32(0)+b16(5)+b16(3)+"no!\x00"+b32(0)+b16(0)+b16(4)+"yes!")
	file := formFile("AIFF", comm(1, 8000, 16, ""), iffChunk("NAME", "T\xE4st"), iffChunk("AUTH", "Somebody"), iffChunk("ANNO", "first"), iffChunk("(c) ", "2020"), mark, ssnd(strings.Repeat("\x00", 16_000)), comt,
		iffChunk("ID3 ", string(id3.WriteSheet(tags.Sheet{Fields: []tags.Field{field("ARTIST", "One", "Two")}}))), iffChunk("ANNO", "second"))
	sameSheet(t, readSheet(t, save(t, "a.aiff", file)), tags.Sheet{
		Fields:   []tags.Field{field("ARTIST", "One", "Two"), field("TITLE", "Täst"), field("COMMENT", "first", "yes!", "second"), field("COPYRIGHT", "2020")},
		Chapters: []tags.Chapter{chapter(0, 500*ms, "Start"), chapter(500*ms, 1000*ms, "Second")},
	})
	broken := formFile("AIFF", comm(1, 1, 16, ""), iffChunk("MARK", b16(9)+b16(1)+b32(0)+"\xFFx"), iffChunk("COMT", b16(9)+b32(0)+b16(0)+b16(99)+"ab"), iffChunk("MARK", ""), ssnd("\x00\x00"))
	sameSheet(t, readSheet(t, save(t, "b.aiff", broken)), tags.Sheet{Fields: []tags.Field{field("COMMENT", "ab")}, Chapters: []tags.Chapter{chapter(0, 125*time.Microsecond, "x")}})
}

// carried is a sheet that an MP3 of six seconds has, with something of everything.
func carried(t testing.TB) tags.Sheet {
	jpeg := load(t, cover(t))
	return tags.Sheet{
		Fields: []tags.Field{
			field("TITLE", "Läufer"), field("ARTIST", "One", "Two"), field("ALBUM", "Album"), field("ALBUMARTIST", "Several"), field("TRACKNUMBER", "3"), field("TRACKTOTAL", "12"),
			field("DATE", "2020-03-01"), field("GENRE", "Speech"), field("COMMENT", "a\nb", "c"), field("LYRICS", "la\nla"), field("ISRC", "XX1230000001"), field("BPM", "120"), field("COPYRIGHT", "2020"), field("CATALOGUE", "A 1", "A 2"),
		},
		Pictures: []tags.Picture{{Kind: tags.FrontCover, MIME: "image/jpeg", Description: "front", Data: jpeg}, {Kind: 4, MIME: "image/jpeg", Description: "back", Data: append(jpeg, 0)}},
		Chapters: []tags.Chapter{chapter(0, 2000*ms, "First"), chapter(2000*ms, 5500*ms, "Zweites")},
	}
}

// id3Script prints what mutagen finds in the ID3v2 tag of a file of any kind.
const id3Script = `
import json, sys, mutagen
t = mutagen.File(sys.argv[1]).tags
d = {k: [str(x) for x in f.text] if isinstance(f.text, list) else [f.text] for k, f in t.items() if hasattr(f, "text")}
d["pictures"] = ["%d %s %s %d" % (f.type, f.mime, f.desc, len(f.data)) for f in t.getall("APIC")]
d["chapters"] = ["%d %d %s" % (f.start_time, f.end_time, f.sub_frames["TIT2"]) for f in t.getall("CHAP")]
print(json.dumps(d))`

// probed is what ffprobe says of a file's tags, and of its chapters.
func probed(t testing.TB, path string) (named map[string]string, chapters []string, pictures int) {
	t.Helper()
	var answer struct {
		Chapters []struct {
			Start string `json:"start_time"`
			End   string `json:"end_time"`
			Tags  map[string]string
		}
		Streams []struct {
			Type string `json:"codec_type"`
		}
		Format struct{ Tags map[string]string }
	}
	if err := json.Unmarshal(run(t, "ffprobe", "-v", "error", "-of", "json", "-show_chapters", "-show_streams", "-show_format", path), &answer); err != nil {
		t.Fatal(err)
	}
	for _, c := range answer.Chapters {
		chapters = append(chapters, c.Start+" "+c.End+" "+c.Tags["title"])
	}
	for _, s := range answer.Streams {
		if s.Type == "video" {
			pictures++
		}
	}
	return answer.Format.Tags, chapters, pictures
}

// All that a tagged MP3 says goes into a WAV and an AIFF made from it, and from a WAV and an AIFF into one another, by the
// word of mutagen and ffprobe, and of our own readers.
func TestSheetIntoWAVAndAIFF(t *testing.T) {
	want, dir, box := carried(t), t.TempDir(), withFFmpeg(t)
	snd := programme(2, 6*44_100, 16, 0.5)
	plain := filepath.Join(dir, "plain.mp3")
	run(t, "lame", "--quiet", "-b", "128", writeWAV(t, snd, 44100), plain)
	mp3 := save(t, "source.mp3", slices.Concat(id3.WriteSheet(want), load(t, plain)))
	sameSheet(t, readSheet(t, mp3), want)

	adts := filepath.Join(dir, "plain.aac")
	run(t, "ffmpeg", "-v", "error", "-i", plain, "-c:a", "aac", adts)
	sameSheet(t, readSheet(t, save(t, "source.aac", slices.Concat(id3.WriteSheet(want), load(t, adts)))), want)

	deliver := func(source, name string) string {
		path := filepath.Join(dir, name)
		spec := wavSpec(16, false)
		if strings.HasSuffix(name, "aiff") {
			spec = Spec{Container: "aiff", Codec: "pcm_s16be", BitDepth: 16}
		}
		spec.Format, spec.TagsFrom = stereo(44100), source
		write(t, box, path, spec, snd)
		dump(t, path) // every length is right
		if got, _ := decode(t, box, path); got.Frames() != snd.Frames() {
			t.Errorf("%s has %d frames, want %d", name, got.Frames(), snd.Frames())
		}
		return path
	}
	wav, aiff := deliver(mp3, "a.wav"), deliver(mp3, "a.aiff")
	for _, path := range []string{wav, aiff, deliver(aiff, "b.wav"), deliver(wav, "b.aiff")} {
		t.Run(filepath.Base(path), func(t *testing.T) {
			sameSheet(t, readSheet(t, path), want)
			var got map[string][]string
			if err := json.Unmarshal(python(t, id3Script, path), &got); err != nil {
				t.Fatal(err)
			}
			frames := map[string][]string{
				"TIT2": {"Läufer"}, "TPE1": {"One", "Two"}, "TALB": {"Album"}, "TPE2": {"Several"}, "TRCK": {"3/12"}, "TDRC": {"2020-03-01"}, "TCON": {"Speech"},
				"COMM::XXX": {"a\nb"}, "COMM: :XXX": {"c"}, "USLT::XXX": {"la\nla"}, "TSRC": {"XX1230000001"}, "TBPM": {"120"}, "TCOP": {"2020"}, "TXXX:CATALOGUE": {"A 1", "A 2"},
				"pictures": got["pictures"], "chapters": {"0 2000 First", "2000 5500 Zweites"},
			}
			if strings.HasSuffix(path, ".wav") {
				frames["chapters"] = []string{} // they are its cue points
			}
			if !reflect.DeepEqual(got, frames) || len(got["pictures"]) != 2 {
				t.Errorf("mutagen reads %q,\nwant %q", got, frames)
			}
			named, chapters, pictures := probed(t, path)
			for name, value := range map[string]string{"title": "Läufer", "album": "Album", "track": "3/12", "genre": "Speech", "copyright": "2020"} {
				if named[name] != value {
					t.Errorf("ffprobe says %s is %q, want %q: %q", name, named[name], value, named)
				}
			}
			ends := map[string]string{".wav": "6.000000", ".aiff": "5.500000"} // FFmpeg reads no lengths of cue points
			if w := []string{"0.000000 2.000000 First", "2.000000 " + ends[filepath.Ext(path)] + " Zweites"}; !slices.Equal(chapters, w) || pictures != 2 {
				t.Errorf("ffprobe sees %d pictures and chapters %q, want %q", pictures, chapters, w)
			}
		})
	}
}

// A tag made from a sheet goes in front of an MP3 that FFmpeg encodes, and ffprobe and mutagen read all of it.
func TestSheetIntoMP3(t *testing.T) {
	want, box := carried(t), withFFmpeg(t)
	path := filepath.Join(t.TempDir(), "x.mp3")
	c := sheetMP3Carrier(want)
	args := append([]string{"-v", "error", "-i", writeWAV(t, programme(2, 6*44_100, 16, 0.5), 44100)}, c.args()...)
	run(t, "ffmpeg", append(args, "-fflags", "+bitexact", path)...)
	finishFile(t, c, path)
	sameSheet(t, readSheet(t, path), want)
	if got, _ := decode(t, box, path); abs(got.Frames()-6*44_100) > 0 {
		t.Errorf("%d frames", got.Frames())
	}
	named, chapters, pictures := probed(t, path)
	if named["title"] != "Läufer" || named["comment"] != "a\nb" || named["TSRC"] != "XX1230000001" || named["TBPM"] != "120" || named["album_artist"] != "Several" || pictures != 2 ||
		!slices.Equal(chapters, []string{"0.000000 2.000000 First", "2.000000 5.500000 Zweites"}) {
		t.Errorf("ffprobe sees %d pictures, chapters %q, %q", pictures, chapters, named)
	}
	if c := sheetMP3Carrier(tags.Sheet{}); !slices.Contains(c.args(), "0") { // no tag at all
		t.Errorf("nothing to say: %q", c.args())
	}
}

// Places in frames stay where they are on the way through a time.
func TestPlacesOfChapters(t *testing.T) {
	for _, rate := range []int{8000, 11025, 44100, 48000, 192_000} {
		f := audio.Format{Rate: rate, Layout: audio.Mono}
		for _, n := range []int64{0, 1, 7, 44_099, 1 << 31, 1<<32 - 1} {
			if got := place(f, duration(f, n)); int64(got) != n {
				t.Errorf("%d Hz: frame %d became %d", rate, n, got)
			}
		}
	}
	if got := place(stereo(48000), 1<<62); got != 1<<32-1 {
		t.Errorf("past the end: %d", got)
	}
}

// finishFile has a carrier complete a file.
func finishFile(t testing.TB, c carrier, path string) {
	t.Helper()
	f, err := os.OpenFile(path, os.O_RDWR, 0)
	if err != nil {
		t.Fatal(err)
	}
	if err := errors.Join(c.finish(f), f.Close()); err != nil {
		t.Fatal(err)
	}
}
