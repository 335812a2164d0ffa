package media

import (
	"bytes"
	"context"
	"encoding/json"
	"maps"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/tags"
)

// mp4Tagged has mutagen put into an M4A whatever it knows, and the boxes that it does not know by hand: a loudness box
// and an extended language in the sound track, a name for it, an item of an unknown kind, XMP at the end of the file.
const mp4Tagged = `
import random, struct, sys, zlib
from mutagen.mp4 import MP4, MP4Cover, MP4FreeForm, AtomDataType
path, jpeg = sys.argv[1], open(sys.argv[2], "rb").read()
def chunk(kind, body): return struct.pack(">I", len(body)) + kind + body + struct.pack(">I", zlib.crc32(kind + body))
pixels = b"".join(b"\0" + random.Random(y).randbytes(300) for y in range(100))
png = b"\x89PNG\r\n\x1a\n" + chunk(b"IHDR", struct.pack(">IIBBBBB", 100, 100, 8, 2, 0, 0, 0)) + chunk(b"IDAT", zlib.compress(pixels)) + chunk(b"IEND", b"")
bmp = b"BM" + struct.pack("<IIIIiiHHIIiiII", 58, 0, 54, 40, 1, 1, 1, 24, 0, 4, 0, 0, 0, 0) + b"abc\0"
f = MP4(path)
if f.tags is None: f.add_tags()
t = f.tags
for key, text in {"\xa9nam": ["Namē"], "\xa9ART": ["One", "Two"], "\xa9alb": ["Album"], "\xa9lyr": ["a\nb\nc"], "\xa9grp": ["G"], "\xa9cmt": ["line"],
	"\xa9day": ["2020-02-03"], "\xa9wrt": ["W"], "aART": ["AA"], "cprt": ["(c)"], "desc": ["D"], "ldes": ["L" * 5000], "sonm": ["S"], "\xa9too": ["an encoder"],
	"purl": ["https://example.org/feed"], "egid": ["id"], "catg": ["C"], "keyw": ["K"]}.items(): t[key] = text
t["trkn"], t["disk"], t["tmpo"] = [(3, 12)], [(1, 2)], [120]
t["cpil"], t["pgap"], t["pcst"], t["stik"], t["rtng"] = True, True, True, [2], [4]
t["covr"] = [MP4Cover(jpeg, MP4Cover.FORMAT_JPEG), MP4Cover(png, MP4Cover.FORMAT_PNG), MP4Cover(bmp, 27)]
t["----:org.example:mood"] = [MP4FreeForm(b"calm"), MP4FreeForm(b"\x00\xff\x01", AtomDataType.IMPLICIT)]
t["----:org.example.other:mood"] = [b"other"]
for name in ("replaygain_track_gain", "REPLAYGAIN_ALBUM_PEAK", "testNORM", "testSMPB", "Encoding Params"): t["----:org.example:" + name] = [b"0"]
f.save()

def box(kind, body): return struct.pack(">I4s", 8 + len(body), kind) + body
def edit(data, path, new):
	"""puts a box behind those in the box that path leads to"""
	if not path: return data + new
	at = 4 if path[0] == b"ilst" else 0
	while at + 8 <= len(data):
		n, kind = struct.unpack(">I4s", data[at:at+8])
		if kind == path[0]: return data[:at] + box(kind, edit(data[at+8:at+n], path[1:], new)) + data[at+n:]
		at += n
	return data + box(path[0], edit(b"", path[1:], new))
d = open(path, "rb").read()
if "front" not in sys.argv:
	trak = [b"moov", b"trak"]
	d = edit(d, trak + [b"udta"], box(b"name", b"Left wing") + box(b"ludt", box(b"tlou", bytes(30))))
	d = edit(d, trak + [b"mdia"], box(b"elng", bytes(4) + b"de-CH\0"))
	d = edit(d, [b"moov", b"udta"], box(b"hnti", b"whatever"))
	d = edit(d, [b"moov", b"udta", b"meta", b"ilst"], box(b"abcd", box(b"data", struct.pack(">II", 0, 0) + b"zz")))
d += box(b"uuid", bytes.fromhex("BE7ACFCB97A942E89C71999491E3AFAC") + b"<x:xmpmeta/>")
open(path, "wb").write(d)
`

// mp4Fields has mutagen and a walk over the boxes tell everything that an M4A carries beside its sound.
const mp4Fields = `
import json, struct, sys
from mutagen.mp4 import MP4
f = MP4(sys.argv[1])
out = {}
for k, v in f.tags.items():
	out[k] = [repr((bytes(x) if isinstance(x, bytes) else x, getattr(x, "imageformat", None), getattr(x, "dataformat", None))) for x in (v if isinstance(v, list) else [v])]
d = open(sys.argv[1], "rb").read()
scale = struct.unpack(">I", d[d.find(b"mvhd")+16:][:4])[0] # mutagen takes chapters, whose unit is 100 ns, for counted by it
out["chapters"] = [repr((round(c.start * scale / 1000, 6), c.title)) for c in f.chapters or []]
for what in (b"name", b"elng", b"hnti", b"abcd", b"chpl", b"uuid", b"ludt", b"hdlr"):
	at, found = 0, []
	while (at := d.find(what, at)) >= 0:
		n = int.from_bytes(d[at-4:at], "big")
		if what != b"name" or b"Left" in d[at:at+20]: found.append(d[at-4:at-4+n].hex())
		at += 1
	out["box " + what.decode()] = found[:1] if what == b"hdlr" else found
print(json.dumps(out))
`

func mp4Carries(t testing.TB, path string) map[string][]string {
	t.Helper()
	var fields map[string][]string
	if err := json.Unmarshal(run(t, "/usr/bin/python3", "-c", mp4Fields, path), &fields); err != nil {
		t.Fatal(err)
	}
	for _, ask := range []string{"chapter=start_time,end_time:chapter_tags", "format_tags=creation_time,title,artist,podcast", "stream_tags=language,creation_time,handler_name"} {
		args := []string{"-v", "error", "-of", "compact", "-show_entries", ask, path}
		if strings.HasPrefix(ask, "stream") {
			args = append([]string{"-select_streams", "a"}, args...)
		}
		fields["ffprobe "+ask] = []string{strings.TrimSpace(strings.ReplaceAll(string(run(t, "ffprobe", args...)), "|side_data|", ""))}
	}
	fields["chapter track"] = []string{trackChapters(t, path)}
	return fields
}

// trackChapters is what ffprobe says of the chapters that a track of titles holds.
func trackChapters(t testing.TB, path string) string {
	t.Helper()
	without := save(t, "x.m4a", hideBox(load(t, path), "chpl"))
	return string(run(t, "ffprobe", "-v", "error", "-of", "compact", "-show_chapters", without))
}

// mp4Source makes an M4A with chapters, language and times, and has it tagged.
func mp4Source(t testing.TB, snd audio.Block, front bool, codec ...string) string {
	t.Helper()
	dir := t.TempDir()
	path, chapters := filepath.Join(dir, "source.m4a"), filepath.Join(dir, "chapters")
	saveAs(t, chapters, []byte(";FFMETADATA1\n[CHAPTER]\nTIMEBASE=1/1000\nSTART=0\nEND=700\ntitle=First\n[CHAPTER]\nTIMEBASE=1/1000\nSTART=700\nEND=1900\ntitle=Sécond\n"))
	args := []string{"-v", "error", "-i", writeWAV(t, snd, 44100), "-i", chapters, "-map_chapters", "1", "-metadata:s:a", "language=deu",
		"-metadata", "creation_time=2011-12-13T14:15:16Z", "-metadata:s:a", "handler_name=The narrator"}
	extra := []string{}
	if front {
		args, extra = append(args, "-movflags", "+faststart"), []string{"front"}
	}
	run(t, "ffmpeg", append(append(args, codec...), path)...)
	run(t, "/usr/bin/python3", append([]string{"-c", mp4Tagged, path, cover(t)}, extra...)...)
	return path
}

// topBoxes names the boxes of a file in their order.
func topBoxes(file []byte) (kinds []string) {
	for len(file) >= 8 {
		n := int(file[0])<<24 | int(file[1])<<16 | int(file[2])<<8 | int(file[3])
		kinds = append(kinds, string(file[4:8]))
		if n < 8 || n > len(file) {
			return append(kinds, "damaged")
		}
		file = file[n:]
	}
	return kinds
}

// A levelled M4A carries all that its source did, by the word of mutagen and ffprobe, but for what is no longer true.
func TestM4ACarriesEverything(t *testing.T) {
	t.Parallel()
	snd := programme(2, 2*44100+1, 16, 0.5)
	for name, codec := range map[string][]string{"aac": {"-c:a", "aac"}, "alac": {"-c:a", "alac"}} {
		for _, front := range []bool{false, true} {
			source := mp4Source(t, snd, front, codec...)
			box, path := withFFmpeg(t), filepath.Join(t.TempDir(), "copy.m4a")
			spec := box.SpecFor(open(t, box, source).Info(), Wish{})
			spec.TagsFrom = source
			write(t, box, path, spec, snd)
			want, got := mp4Carries(t, source), mp4Carries(t, path)
			for key := range want {
				untrue := slices.ContainsFunc([]string{"gain", "GAIN", "NORM", "SMPB", "Encoding Params", "\u00a9too", "ludt"}, func(s string) bool { return strings.Contains(key, s) })
				if untrue && len(got[key]) > 0 {
					t.Errorf("%s: %s is still there: %.80s", name, key, got[key])
				}
				if !untrue && !slices.Equal(got[key], want[key]) {
					t.Errorf("%s, %v: %s\n is %.300q\nnot %.300q", name, front, key, got[key], want[key])
				}
			}
			for key := range got {
				if want[key] == nil {
					t.Errorf("%s: %s came from nowhere", name, key)
				}
			}
			if len(want) < 40 || !strings.Contains(want["chapter track"][0], "Sécond") || !front && len(want["box elng"])+len(want["box name"])+len(want["box abcd"]) != 3 {
				t.Errorf("the source is not what it should be: %v", slices.Sorted(maps.Keys(want)))
			}
			kinds := topBoxes(load(t, path))
			if inFront := slices.Index(kinds, "moov") < slices.Index(kinds, "mdat"); inFront != front || slices.Contains(kinds, "damaged") {
				t.Errorf("%s: boxes %v", name, kinds)
			}
			again, info := decode(t, box, path)
			if again.Frames() != snd.Frames() || info.Frames != int64(snd.Frames()) || lag(snd[0], again[0]) != 0 {
				t.Errorf("%s: %d frames, promised %d, %d late", name, again.Frames(), info.Frames, lag(snd[0], again[0]))
			}
			if name == "alac" {
				sameSound(t, again, snd)
			}
		}
	}
}

// Chapters of QuickTime's kind come with their pictures: the packets of both tracks are the same.
func TestM4AChapterPictures(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	snd := programme(1, 3*44100, 16, 0.5)
	source, both, path := mp4Source(t, snd, false, "-c:a", "aac"), filepath.Join(dir, "both.m4a"), filepath.Join(dir, "copy.m4a")
	run(t, "ffmpeg", "-v", "error", "-i", source, "-f", "lavfi", "-i", "testsrc=s=64x64:r=1:d=3", "-map", "0:a", "-map", "1",
		"-map_chapters", "0", "-c:a", "copy", "-c:v", "mjpeg", "-pix_fmt", "yuvj420p", "-f", "mp4", both)
	file := load(t, both)
	const reference = "\x00\x00\x00\x14tref\x00\x00\x00\x0cchap\x00\x00\x00\x03" // to the titles, from sound and pictures each
	at, next := bytes.Index(file, []byte(reference)), bytes.LastIndex(file, []byte(reference))
	if at < 0 || at == next {
		t.Fatalf("the tracks of %s are not as expected", both)
	}
	copy(file[next+4:], "free")
	for _, box := range []int{bytes.Index(file, []byte("moov")) - 4, bytes.Index(file, []byte("trak")) - 4, at, at + 8} {
		file[box+3] += 4 // does not carry: checked by ffprobe below
	}
	saveAs(t, both, slices.Concat(file[:at+16], []byte{0, 0, 0, 2}, file[at+16:]))
	write(t, withFFmpeg(t), path, Spec{Container: "mp4", Codec: "aac", Format: audio.Format{Rate: 44100, Layout: audio.Mono}, TagsFrom: both}, snd)
	pictures := func(path string) string {
		return string(run(t, "ffmpeg", "-v", "error", "-i", path, "-map", "0:v", "-c", "copy", "-f", "framehash", "-"))
	}
	if a, b := pictures(both), pictures(path); a != b || strings.Count(a, "\n") < 12 {
		t.Errorf("%s\nnot\n%s", b, a)
	}
	if a, b := trackChapters(t, both), trackChapters(t, path); a != b || !strings.Contains(a, "Sécond") {
		t.Errorf("%s\nnot\n%s", b, a)
	}
	for _, path := range []string{both, path} {
		if out := string(run(t, "ffprobe", "-v", "error", "-show_entries", "stream_disposition=timed_thumbnails", "-of", "csv", path)); !strings.Contains(out, ",1") {
			t.Errorf("the pictures are not those of chapters: %s", out)
		}
	}
}

// A copy of an audiobook is one.
func TestM4BStaysOne(t *testing.T) {
	snd := programme(1, 20_000, 16, 0.5)
	source := mp4Source(t, snd, false, "-c:a", "aac")
	path := filepath.Join(t.TempDir(), "copy")
	saveAs(t, source, bytes.Replace(load(t, source), []byte("ftypM4A "), []byte("ftypM4B "), 1))
	write(t, withFFmpeg(t), path, Spec{Container: "mp4", Codec: "aac", Format: audio.Format{Rate: 44100, Layout: audio.Mono}, TagsFrom: source}, snd)
	if _, tags := ffprobe(t, path); tags["major_brand"] != "M4B " {
		t.Errorf("%v", tags)
	}
}

// Boxes that are damaged cost nothing of the sound.
func TestM4ADamagedTags(t *testing.T) {
	t.Parallel()
	snd := programme(1, 20_000, 16, 0.5)
	for _, kind := range []string{"ilst", "meta", "covr", "chpl", "hdlr", "stsz", "tref"} {
		source := mp4Source(t, snd, false, "-c:a", "aac")
		file := load(t, source)
		at := bytes.Index(file, []byte(kind))
		copy(file[at+4:], "\x7F\xFF\xFF\xFF\x7F\xFF\xFF\xFF")
		path := filepath.Join(t.TempDir(), "copy.m4a")
		spec := Spec{Container: "mp4", Codec: "aac", Format: audio.Format{Rate: 44100, Layout: audio.Mono}, TagsFrom: saveAs(t, source, file)}
		if err := tryWrite(context.Background(), withFFmpeg(t), path, spec, snd); err != nil {
			t.Errorf("%s: %v", kind, err)
			continue
		}
		if got, _ := decode(t, withFFmpeg(t), path); got.Frames() != snd.Frames() {
			t.Errorf("%s: %d frames", kind, got.Frames())
		}
	}
}

// Gain tags go into an M4A by way of the toolbox, and the sound stays; what has none is refused.
func TestRetagM4A(t *testing.T) {
	source := mp4Source(t, programme(1, 20_000, 16, 0.5), true, "-c:a", "aac")
	path := filepath.Join(t.TempDir(), "copy.m4a")
	if err := withFFmpeg(t).Retag(context.Background(), source, path, tags.Gains{Track: tags.Loudness{Integrated: -20, Peak: -6}}); err != nil {
		t.Fatal(err)
	}
	want, got := mp4Carries(t, source), mp4Carries(t, path)
	for key := range want {
		if old := strings.Contains(strings.ToLower(key), "gain"); old == slices.Equal(got[key], want[key]) {
			t.Errorf("%s: %.200q, was %.200q", key, got[key], want[key])
		}
	}
	if _, tags := ffprobe(t, path); tags["replaygain_track_gain"] != "2.00 dB" || tags["replaygain_track_peak"] != "0.501187" {
		t.Errorf("%v", tags)
	}
	if !bytes.Equal(rawInts(t, source), rawInts(t, path)) {
		t.Error("the sound is another")
	}
	torn := save(t, "torn.m4a", load(t, source)[:20_000])
	if err := withFFmpeg(t).Retag(context.Background(), torn, path, tags.Gains{}); err == nil || !strings.HasPrefix(err.Error(), torn+": ") {
		t.Errorf("%v", err)
	}
}
