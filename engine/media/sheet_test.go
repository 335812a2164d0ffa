package media

import (
	"bytes"
	"crypto/md5"
	"encoding/json"
	"fmt"
	"maps"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// sheetTagger has mutagen put fields, pictures and, in comments, chapters into a file of any kind, in the words that the
// file's format has for them.
const sheetTagger = `
import base64, json, struct, sys, mutagen
from mutagen.flac import FLAC, Picture
from mutagen.mp4 import MP4Cover
from mutagen.apev2 import APEValue, BINARY
from mutagen.asf import ASFByteArrayAttribute
path, want, images = sys.argv[1], json.loads(sys.argv[2]), [open(p, "rb").read() for p in sys.argv[3:]]
f = mutagen.File(path)
if f.tags is None: f.add_tags()
kind = type(f).__name__
pictures = []
for n, (what, data) in enumerate(zip((4, 3), images)): # the back in front of the front
	p = Picture()
	p.type, p.mime, p.desc, p.data = what, "image/png" if data[:1] == b"\x89" else "image/jpeg", "Picture %d" % what, data
	pictures.append(p)
MP4 = {"TITLE": "\xa9nam", "ARTIST": "\xa9ART", "ALBUM": "\xa9alb", "ALBUMARTIST": "aART", "DATE": "\xa9day", "GENRE": "\xa9gen", "COMPOSER": "\xa9wrt",
	"COMMENT": "\xa9cmt", "LYRICS": "\xa9lyr", "COPYRIGHT": "cprt"}
WORDS = {"MUSICBRAINZ_TRACKID": "MusicBrainz Track Id"}
ASF = {"TITLE": "Title", "ARTIST": "Author", "ALBUM": "WM/AlbumTitle", "ALBUMARTIST": "WM/AlbumArtist", "DATE": "WM/Year", "GENRE": "WM/Genre", "COMPOSER": "WM/Composer",
	"COMMENT": "Description", "LYRICS": "WM/Lyrics", "COPYRIGHT": "Copyright", "ISRC": "WM/ISRC", "BPM": "WM/BeatsPerMinute", "MUSICBRAINZ_TRACKID": "MusicBrainz/Track Id", "TRACKNUMBER": "WM/TrackNumber"}
APE = {"ALBUMARTIST": "Album Artist", "TRACKNUMBER": "Track", "DATE": "Year"}
track = "%s/%s" % (want.pop("TRACKNUMBER")[0], want.pop("TRACKTOTAL")[0])
if kind in ("FLAC", "OggVorbis", "OggOpus"):
	for name, values in want.items(): f.tags[name.lower()] = values
	f.tags["tracknumber"] = track
	f.tags["replaygain_track_gain"], f.tags["encoder"] = "-7 dB", "an encoder"
	for n, (at, title) in enumerate((("00:00:00.000", "First"), ("00:00:00.700", "Sécond"), ("00:00:01.234", "Third"))):
		f.tags["CHAPTER%03d" % (n+1)], f.tags["CHAPTER%03dNAME" % (n+1)] = at, title
	if kind == "FLAC":
		for p in pictures: f.add_picture(p)
	else: f.tags["metadata_block_picture"] = [base64.b64encode(p.write()).decode() for p in pictures]
elif kind == "MP4":
	for name, values in want.items():
		if name == "BPM": f.tags["tmpo"] = [int(values[0])]
		elif name in MP4: f.tags[MP4[name]] = values
		else: f.tags["----:com.apple.iTunes:" + WORDS.get(name, name)] = [v.encode() for v in values]
	f.tags["trkn"] = [tuple(int(n) for n in track.split("/"))]
	f.tags["covr"] = [MP4Cover(p.data, MP4Cover.FORMAT_PNG if p.mime == "image/png" else MP4Cover.FORMAT_JPEG) for p in pictures]
	f.tags["----:com.apple.iTunes:replaygain_track_gain"] = [b"-7 dB"]
elif kind == "ASF":
	for name, values in want.items(): f.tags[ASF.get(name, name)] = values
	f.tags["WM/TrackNumber"] = track
	f.tags["WM/Picture"] = [ASFByteArrayAttribute(struct.pack("<BI", p.type, len(p.data)) + (p.mime + "\0" + p.desc + "\0").encode("utf-16-le") + p.data) for p in pictures]
elif kind == "WavPack":
	for name, values in want.items(): f.tags[APE.get(name, name)] = values
	f.tags["Track"] = track
	for p, key in zip(pictures, ("Cover Art (Back)", "Cover Art (Front)")): f.tags[key] = APEValue(b"x." + p.mime[6:].encode() + b"\0" + p.data, BINARY)
f.save()
`

// sheetReader has mutagen tell what a file carries: fields by the names of comments, pictures by kind, type and checksum.
const sheetReader = `
import base64, hashlib, json, sys, mutagen
from mutagen.flac import Picture
f = mutagen.File(sys.argv[1])
kind = type(f).__name__
fields, pictures = {}, []
def add(p): pictures.append("%d %s %s %dx%dx%d %s" % (p.type, p.mime, p.desc, p.width, p.height, p.depth, hashlib.md5(p.data).hexdigest()))
NAMES = {"\xa9nam": "TITLE", "\xa9ART": "ARTIST", "\xa9alb": "ALBUM", "aART": "ALBUMARTIST", "\xa9day": "DATE", "\xa9gen": "GENRE", "\xa9wrt": "COMPOSER",
	"\xa9cmt": "COMMENT", "\xa9lyr": "LYRICS", "cprt": "COPYRIGHT", "tmpo": "BPM"}
if kind == "MP4":
	for name, values in f.tags.items():
		if name == "covr": pictures += ["%d %s" % (v.imageformat, hashlib.md5(v).hexdigest()) for v in values]
		elif name == "trkn": fields["TRACKNUMBER"], fields["TRACKTOTAL"] = [[str(n)] for n in values[0]]
		elif name.startswith("----"): fields[name.rsplit(":", 1)[1].replace("MusicBrainz Track Id", "MUSICBRAINZ_TRACKID")] = [v.decode() for v in values]
		else: fields[NAMES.get(name, name)] = [str(v) for v in values]
else:
	for name, value in f.tags:
		name = name.upper()
		if name == "METADATA_BLOCK_PICTURE": add(Picture(base64.b64decode(value)))
		elif not name.startswith("CHAPTER"): fields.setdefault(name, []).append(value)
	for p in getattr(f, "pictures", []): add(p)
print(json.dumps({"fields": fields, "pictures": pictures}))
`

// sheetFields are what the sources say. Only a first value comes from those that FFmpeg reads.
func sheetFields() map[string][]string {
	return map[string][]string{
		"TITLE": {"Läuft = 1"}, "ARTIST": {"One", "Two"}, "ALBUM": {"Album"}, "ALBUMARTIST": {"Both"}, "DATE": {"2020-02-03"}, "GENRE": {"Folk", "Talk"},
		"COMPOSER": {"W"}, "COMMENT": {"a\nb"}, "LYRICS": {"la\nla"}, "COPYRIGHT": {"(c)"}, "ISRC": {"ZZABC2012345"}, "BPM": {"120"},
		"MUSICBRAINZ_TRACKID": {"0-1-2"}, "X OWN": {"m", "n"}, "TRACKNUMBER": {"3"}, "TRACKTOTAL": {"12"},
	}
}

// chaptersIn is what ffprobe says of chapters.
func chaptersIn(t testing.TB, path string) (list []string) {
	t.Helper()
	var said struct {
		Chapters []struct {
			Start string            `json:"start_time"`
			Tags  map[string]string `json:"tags"`
		} `json:"chapters"`
	}
	if err := json.Unmarshal(run(t, "ffprobe", "-v", "error", "-of", "json", "-show_chapters", path), &said); err != nil {
		t.Fatal(err)
	}
	for _, ch := range said.Chapters {
		list = append(list, ch.Start+" "+ch.Tags["title"])
	}
	return list
}

// What a recording carries comes through from each format to each other, by the word of mutagen and ffprobe.
func TestSheetsBetweenFormats(t *testing.T) {
	t.Parallel()
	dir, box := t.TempDir(), withFFmpeg(t)
	snd := programme(2, 2*48000+1, 16, 0.5)
	wav, jpeg, png, marks := writeWAV(t, snd, 48000), cover(t), filepath.Join(dir, "x.png"), filepath.Join(dir, "marks")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "color=blue:s=80x48", "-frames:v", "1", "-pix_fmt", "rgb24", png)
	saveAs(t, marks, []byte(";FFMETADATA1\n[CHAPTER]\nTIMEBASE=1/1000\nSTART=0\nEND=700\ntitle=First\n[CHAPTER]\nTIMEBASE=1/1000\nSTART=700\nEND=1234\ntitle=Sécond\n"+
		"[CHAPTER]\nTIMEBASE=1/1000\nSTART=1234\nEND=2000\ntitle=Third\n"))
	sum := func(path string) string { return fmt.Sprintf("%x", md5.Sum(load(t, path))) }
	chapters := []string{"0.000000 First", "0.700000 Sécond", "1.234000 Third"}
	front, back := "3 image/png Picture 3 80x48x24 "+sum(png), "4 image/jpeg Picture 4 64x64x24 "+sum(jpeg)
	bare := func(kind int, mime, size, path string) string {
		return fmt.Sprintf("%d image/%s  %s %s", kind, mime, size, sum(path))
	}
	asMP4 := []string{"14 " + sum(png), "13 " + sum(jpeg)}
	sources := map[string]struct {
		make     []string
		probed   bool // FFmpeg tells what is in it
		chapters []string
		pictures []string
		asMP4    []string
	}{
		"flac": {[]string{"-c:a", "flac"}, false, chapters, []string{back, front}, asMP4},
		"ogg":  {[]string{"-c:a", "libvorbis"}, false, chapters, []string{back, front}, asMP4},
		"opus": {[]string{"-c:a", "libopus"}, false, chapters, []string{back, front}, asMP4},
		"m4a": {[]string{"-c:a", "aac", "-map_chapters", "1"}, false, chapters,
			[]string{bare(3, "jpeg", "64x64x24", jpeg), bare(0, "png", "80x48x24", png)}, []string{asMP4[1], asMP4[0]}},
		"wma": {[]string{"-c:a", "wmav2", "-map_chapters", "1"}, true, chapters, []string{front, back}, asMP4},
		"wv": {[]string{"-c:a", "wavpack"}, false, nil,
			[]string{bare(3, "png", "80x48x24", png), bare(4, "jpeg", "64x64x24", jpeg)}, asMP4},
	}
	targets := map[string]Spec{
		"flac": flacSpec(16, 48000), "ogg": {Container: "ogg", Codec: "vorbis", Format: stereo(48000)},
		"opus": {Container: "ogg", Codec: "opus", Format: stereo(48000)}, "m4a": {Container: "mp4", Codec: "aac", Format: stereo(48000)},
	}
	for from, source := range sources {
		path := filepath.Join(dir, "source."+from)
		run(t, "ffmpeg", append(append([]string{"-v", "error", "-i", wav, "-i", marks, "-map", "0:a", "-map_chapters", "-1"}, source.make...), "-fflags", "+bitexact", path)...)
		fields := sheetFields()
		if source.probed {
			fields["ARTIST"], fields["GENRE"], fields["X OWN"] = []string{"One"}, []string{"Folk"}, []string{"m"}
		}
		asked, err := json.Marshal(fields)
		if err != nil {
			t.Fatal(err)
		}
		run(t, "/usr/bin/python3", "-c", sheetTagger, path, string(asked), jpeg, png)
		for to, spec := range targets {
			if from == to {
				continue // carried byte for byte
			}
			t.Run(from+" to "+to, func(t *testing.T) {
				copied := filepath.Join(t.TempDir(), "copy."+to)
				spec.TagsFrom = path
				write(t, box, copied, spec, snd)
				checkSheet(t, copied, fields, map[bool][]string{true: source.asMP4, false: source.pictures}[to == "m4a"], source.chapters)
				switch to {
				case "flac":
					run(t, "flac", "-t", "-s", "--warnings-as-errors", copied)
				case "opus":
					run(t, "opusinfo", copied)
				case "m4a":
					if track := trackChapters(t, copied); len(source.chapters) > 0 && !strings.Contains(track, "|start_time=1.234000|") {
						t.Errorf("titles %s", track)
					}
				}
				if got, _ := decode(t, box, copied); got.Frames() != snd.Frames() || lag(snd[0], got[0]) != 0 {
					t.Errorf("%d frames, %d late", got.Frames(), lag(snd[0], got[0]))
				}
			})
		}
	}
}

func checkSheet(t *testing.T, path string, fields map[string][]string, pictures, chapters []string) {
	t.Helper()
	var got struct {
		Fields   map[string][]string
		Pictures []string
	}
	if err := json.Unmarshal(run(t, "/usr/bin/python3", "-c", sheetReader, path), &got); err != nil {
		t.Fatal(err)
	}
	if said := got.Fields["TRACKNUMBER"]; len(said) == 1 && said[0] == "3/12" { // verbatim between comments
		got.Fields["TRACKNUMBER"], got.Fields["TRACKTOTAL"] = []string{"3"}, []string{"12"}
	}
	for _, name := range slices.Sorted(maps.Keys(got.Fields)) {
		if !slices.Equal(got.Fields[name], fields[name]) {
			t.Errorf("%s is %q, want %q", name, got.Fields[name], fields[name])
		}
	}
	if len(got.Fields) != len(fields) {
		t.Errorf("fields %q", slices.Sorted(maps.Keys(got.Fields)))
	}
	if !slices.Equal(got.Pictures, pictures) {
		t.Errorf("pictures %q\nwant %q", got.Pictures, pictures)
	}
	if list := chaptersIn(t, path); !slices.Equal(list, chapters) {
		t.Errorf("chapters %q, want %q", list, chapters)
	}
}

// The language of a track comes through, and none is invented.
func TestSheetLanguage(t *testing.T) {
	dir, box := t.TempDir(), withFFmpeg(t)
	snd := programme(1, 20_000, 16, 0.5)
	wav, mono := writeWAV(t, snd, 48000), audio.Format{Rate: 48000, Layout: audio.Mono}
	for language, want := range map[string][]string{"deu": {"LANGUAGE=deu"}, "und": nil} {
		source, path := filepath.Join(dir, language+".m4a"), filepath.Join(dir, language+".ogg")
		run(t, "ffmpeg", "-v", "error", "-i", wav, "-metadata:s:a", "language="+language, source)
		write(t, box, path, Spec{Container: "ogg", Codec: "vorbis", Format: mono, TagsFrom: source}, snd)
		if _, got := entries(t, path); !slices.Equal(got, want) {
			t.Errorf("%s: %q", language, got)
		}
		back := filepath.Join(dir, language+"-back.m4a")
		write(t, box, back, Spec{Container: "mp4", Codec: "aac", Format: mono, TagsFrom: path}, snd)
		stream, _ := ffprobe(t, back)
		if got := stream["tags"].(map[string]any)["language"]; got != language {
			t.Errorf("%v, want %s", got, language)
		}
	}
}

// What ID3 tags around a FLAC say, and its comments do not, comes through to FLAC and to others; what both say is the
// comments'.
func TestID3AroundFLAC(t *testing.T) {
	dir, box := t.TempDir(), withFFmpeg(t)
	snd := programme(2, 30_000, 16, 0.5)
	plain, tag := filepath.Join(dir, "plain.flac"), filepath.Join(dir, "tag")
	run(t, "flac", "-s", "-T", "Title=Own", "-o", plain, writeWAV(t, snd, 48000))
	run(t, "/usr/bin/python3", "-c", `
import sys
from mutagen.id3 import ID3, TIT2, TPE1, TXXX, APIC
f = ID3()
f.add(TIT2(text=["Other"])); f.add(TPE1(text=["One", "Two"])); f.add(TXXX(desc="replaygain_track_gain", text=["-7 dB"]))
f.add(APIC(type=3, mime="image/jpeg", desc="x", data=open(sys.argv[2], "rb").read()))
f.save(sys.argv[1])`, tag, cover(t))
	v1 := make([]byte, 128) // ID3v1: title, artist, album of 30 bytes each behind its mark
	copy(v1, "TAGOther")
	copy(v1[63:], "Album")
	v1[127] = 255 // no genre
	source := saveAs(t, filepath.Join(dir, "source.flac"), slices.Concat(load(t, tag), load(t, plain), v1))
	want := []string{"Title=Own", "ARTIST=One", "ARTIST=Two", "ALBUM=Album"}
	for name, test := range map[string]struct {
		box  *Toolbox
		spec Spec
	}{
		"flac": {box, flacSpec(16, 48000)}, "native.flac": {withoutFFmpeg(), flacSpec(16, 48000)},
		"ogg": {box, Spec{Container: "ogg", Codec: "vorbis", Format: stereo(48000)}},
	} {
		path := filepath.Join(dir, "copy."+name)
		test.spec.TagsFrom = source
		write(t, test.box, path, test.spec, snd)
		_, got := entries(t, path)
		if len(got) > 4 && strings.HasPrefix(got[4], "METADATA_BLOCK_PICTURE=") || name != "ogg" && bytes.Contains(load(t, path), []byte("image/jpeg")) {
			got = got[:4]
		} else {
			t.Errorf("%s: there is no picture", name)
		}
		if !slices.Equal(got, want) {
			t.Errorf("%s: %q", name, got)
		}
	}
}

// Of formats without a reader here FFmpeg tells tags, chapters and pictures: Matroska counts chapters in nanoseconds.
func TestSheetByFFmpeg(t *testing.T) {
	dir, box := t.TempDir(), withFFmpeg(t)
	snd := programme(2, 96_000, 16, 0.5)
	marks := saveAs(t, filepath.Join(dir, "marks"), []byte(";FFMETADATA1\n[CHAPTER]\nTIMEBASE=1/1000000000\nSTART=500000000\nEND=700000000\ntitle=First\n"+
		"[CHAPTER]\nTIMEBASE=1/1000000000\nSTART=1234567890\nEND=2000000000\ntitle=Sécond\n"))
	source := filepath.Join(dir, "source.mka")
	run(t, "ffmpeg", "-v", "error", "-i", writeWAV(t, snd, 48000), "-i", marks, "-map", "0", "-map_chapters", "1", "-c:a", "flac", "-metadata", "title=T", "-metadata", "track=3/12",
		"-attach", cover(t), "-metadata:s:t", "mimetype=image/jpeg", "-metadata:s:t", "filename=cover.jpg", source)
	for name, spec := range map[string]Spec{"x.opus": {Container: "ogg", Codec: "opus", Format: stereo(48000)}, "x.flac": flacSpec(16, 48000)} {
		path := filepath.Join(dir, name)
		spec.TagsFrom = source
		write(t, box, path, spec, snd)
		_, got := entries(t, path)
		got = slices.DeleteFunc(got, func(s string) bool { return strings.HasPrefix(s, "METADATA_BLOCK_PICTURE=") })
		if want := []string{"TITLE=T", "TRACKNUMBER=3", "TRACKTOTAL=12", "CHAPTER001=00:00:00.500", "CHAPTER001NAME=First",
			"CHAPTER002=00:00:01.235", "CHAPTER002NAME=Sécond"}; !slices.Equal(got, want) {
			t.Errorf("%s: %q", name, got)
		}
		if streams := string(run(t, "ffprobe", "-v", "error", "-show_entries", "stream=codec_name:stream_tags=comment", "-of", "csv", path)); !strings.Contains(streams, "mjpeg,Cover (front)") {
			t.Errorf("%s: %s", name, streams)
		}
	}
}
