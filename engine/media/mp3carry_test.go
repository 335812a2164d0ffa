package media

import (
	"bytes"
	"encoding/json"
	"fmt"
	"maps"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/tags"
)

// python runs a script with mutagen, a library of tags that has nothing to do with this one.
func python(t testing.TB, script string, args ...string) []byte {
	t.Helper()
	return run(t, "/usr/bin/python3", append([]string{"-c", script}, args...)...)
}

// tagScript gives the MP3 argv[1] an ID3v2 tag of version argv[2], an ID3v1 tag and an APEv2 tag, with everything in them.
const tagScript = `
import sys
from mutagen.id3 import ID3, Frames
globals().update(Frames)
from mutagen.apev2 import APEv2, APEValue, BINARY
path, version, picture = sys.argv[1], int(sys.argv[2]), open(sys.argv[3], "rb").read()
t = ID3()
for f in [
    TIT2(encoding=1, text="Läufer"), TPE1(encoding=3 if version == 4 else 1, text=["One", "Two"]), TRCK(encoding=0, text="3/9"),
    TCON(encoding=0, text="Speech"), TLEN(encoding=0, text="1234"), TSSE(encoding=0, text="An encoder"), TENC(encoding=0, text="A station"),
    TXXX(encoding=1, desc="Catalogue", text="A 1"), TXXX(encoding=0, desc="replaygain_track_gain", text="-7.00 dB"),
    TXXX(encoding=1, desc="REPLAYGAIN_ALBUM_PEAK", text="1.0"),
    COMM(encoding=1, lang="eng", desc="", text="a\nb"), COMM(encoding=0, lang="eng", desc="iTunNORM", text=" 00000001"),
    COMM(encoding=0, lang="deu", desc="Listen again", text="c"),
    APIC(encoding=0, mime="image/jpeg", type=3, desc="front", data=picture), APIC(encoding=1, mime="image/jpeg", type=4, desc="bäck", data=picture + b"\xff\x00\xff"),
    USLT(encoding=1, lang="eng", desc="d", text="words"), SYLT(encoding=0, lang="eng", format=2, type=1, desc="s", text=[("la", 100), ("lo", 200)]),
    PRIV(owner="x", data=b'\xff\x00\xfb' * 20), PRIV(owner="PeakValue", data=b"1234"), GEOB(encoding=0, mime="a/b", filename="f", desc="g", data=b"\xff\xfb\x90\x00" * 50),
    UFID(owner="http://x", data=b"id"), POPM(email="a@b", rating=128, count=3), PCNT(count=7), WXXX(encoding=0, desc="w", url="http://w"), WOAF(url="http://o"),
    ETCO(format=2, events=[(3, 100)]), MCDI(data=b"toc"), USER(encoding=0, lang="eng", text="terms"), OWNE(encoding=0, price="1", date="20200101", seller="s"),
    RVA2(desc="track", channel=1, gain=-3, peak=0.5), CTOC(element_id="toc", flags=3, child_element_ids=["a", "b"], sub_frames=[TIT2(encoding=0, text="Contents")]),
    CHAP(element_id="a", start_time=0, end_time=1000, start_offset=500, end_offset=900, sub_frames=[TIT2(encoding=0, text="First"), APIC(encoding=0, mime="image/jpeg", type=0, desc="", data=picture)]),
    CHAP(element_id="b", start_time=1000, end_time=2000, start_offset=900, end_offset=2**32 - 1, sub_frames=[TIT2(encoding=1, text="Second"), WXXX(encoding=0, desc="l", url="http://l")]),
]:
    t.add(f)
if version == 3:
    t.update_to_v23()
    t.delall("RVA2")
a = APEv2()
a["Title"], a["FILE_GAIN_UNDO"], a["replaygain_track_gain"] = "Läufer", "+001,+001,N", "-7.00 dB"
a["Cover Art (Front)"] = APEValue(b"f.jpg\0" + picture, BINARY)
a.save(path)
t.save(path, v1=2, v2_version=version, padding=lambda i: 777)
`

// dumpScript prints what mutagen finds in a file: name and content of every frame and item, and its kinds of tags.
const dumpScript = `
import sys, json
from mutagen.id3 import ID3, ID3NoHeaderError, ParseID3v1
from mutagen.apev2 import APEv2, APENoHeaderError
path, d = sys.argv[1], {}
try:
    t = ID3(path, translate=False, load_v1=False)
    d["version"] = str(t.version)
    for key, f in t.items():
        d[key] = repr(f)
    for data in t.unknown_frames:
        d["unknown " + repr(data[:4])] = repr(data)
except ID3NoHeaderError:
    pass
try:
    for key, v in APEv2(path).items():
        d["APE " + key] = repr(v)
except APENoHeaderError:
    pass
v1 = ParseID3v1(open(path, "rb").read()[-128:])
if v1:
    for key, f in v1.items():
        d["v1 " + key] = repr(f)
print(json.dumps(d))
`

func dumped(t testing.TB, path string) (d map[string]string) {
	t.Helper()
	if err := json.Unmarshal(python(t, dumpScript, path), &d); err != nil {
		t.Fatal(err)
	}
	return d
}

// mp3Source is two seconds of MP3 with the tags of a version, with no ID3v2 if it is 0.
func mp3Source(t testing.TB, version int) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), "source.mp3")
	run(t, "lame", "--quiet", "-b", "128", writeWAV(t, programme(2, 88_200, 16, 0.5), 44100), path)
	switch version {
	case 0:
		python(t, "import sys; from mutagen.apev2 import APEv2; a = APEv2(); a['Title'] = 'T'; a.save(sys.argv[1])", path)
	case 2: // mutagen writes no 2.2: frames of three letters and three bytes of size (ID3v2.2.0, 3.2)
		var body []byte
		for _, f := range [][2]string{
			{"TT2", "\x01\xFF\xFEL\x00\xE4\x00"}, {"TXX", "\x00replaygain_track_gain\x00-7 dB"}, {"COM", "\x00engiTunNORM\x00 0001"},
			{"PIC", "\x00JPG\x03front\x00" + string(load(t, cover(t)))}, {"ULT", "\x00engd\x00words"}, {"UFI", "http://x\x00id"}, {"TSS", "\x00An encoder"},
		} {
			n := len(f[1])
			body = append(body, f[0]+string([]byte{byte(n >> 16), byte(n >> 8), byte(n)})+f[1]...)
		}
		n := len(body)
		head := []byte{'I', 'D', '3', 2, 0, 0, byte(n >> 21), byte(n >> 14 & 127), byte(n >> 7 & 127), byte(n & 127)}
		return save(t, "source.mp3", slices.Concat(head, body, load(t, path)))
	default:
		python(t, tagScript, path, fmt.Sprint(version), cover(t))
	}
	return path
}

// gone are the frames and items that a levelled copy of a source must not have.
var gone = map[int][]string{
	0: {},
	2: {"TXXX:replaygain_track_gain", "COMM:iTunNORM:eng", "TSSE"}, // mutagen gives frames of 2.2 their later names
	3: {"TXXX:replaygain_track_gain", "TXXX:REPLAYGAIN_ALBUM_PEAK", "COMM:iTunNORM:eng", "TSSE", "PRIV:PeakValue:1234", "APE FILE_GAIN_UNDO", "APE replaygain_track_gain"},
	4: {"TXXX:replaygain_track_gain", "TXXX:REPLAYGAIN_ALBUM_PEAK", "COMM:iTunNORM:eng", "TSSE", "PRIV:PeakValue:1234", "APE FILE_GAIN_UNDO", "APE replaygain_track_gain", "RVA2:track"},
}

// A levelled MP3 has every field of its source, by the word of mutagen and ffprobe, but for those that have to go; its sound
// is in order.
func TestMP3TagsAreCarriedWhole(t *testing.T) {
	box := withFFmpeg(t)
	for version, gone := range gone {
		t.Run(fmt.Sprint(version), func(t *testing.T) {
			t.Parallel()
			source, path := mp3Source(t, version), filepath.Join(t.TempDir(), "copy.mp3")
			snd, info := decode(t, box, source)
			spec := box.SpecFor(info, Wish{})
			spec.TagsFrom = source
			write(t, box, path, spec, snd)
			want, got := dumped(t, source), dumped(t, path)
			if len(want) < 2 && version > 0 || version > 2 && (len(want) < 40 || want["v1 TIT2"] == "") {
				t.Fatalf("the source has only %v", slices.Sorted(maps.Keys(want)))
			}
			for _, key := range gone {
				if want[key] == "" {
					t.Errorf("the source has no %s: %v", key, slices.Sorted(maps.Keys(want)))
				}
				delete(want, key)
			}
			for key, value := range want {
				if strings.HasPrefix(key, "CHAP") {
					for _, place := range []string{"offset=500", "offset=900"} {
						value = strings.ReplaceAll(value, place, "offset=4294967295")
					}
				}
				if got[key] != value {
					t.Errorf("%s is %.200s, was %.200s", key, got[key], value)
				}
				delete(got, key)
			}
			if len(got) > 0 {
				t.Errorf("new: %v", got)
			}
			if was, is := seen(t, source), seen(t, path); was != is {
				t.Errorf("ffprobe sees\n%s\nwas\n%s", is, was)
			}
			again, after := decode(t, box, path)
			if again.Frames() != snd.Frames() || after.BitRate != info.BitRate || after.Variable != info.Variable {
				t.Errorf("%d frames of %d, %+v, was %+v", again.Frames(), snd.Frames(), after, info)
			}
		})
	}
}

// seen is what ffprobe says of a file's chapters, pictures and tags, but for those that have to go.
func seen(t testing.TB, path string) string {
	t.Helper()
	out := string(run(t, "ffprobe", "-v", "error", "-show_chapters", "-show_entries", "stream=codec_name,width,height:stream_tags:format_tags", "-of", "flat", path))
	lines := slices.DeleteFunc(strings.Split(out, "\n"), func(line string) bool {
		lower := strings.ToLower(line)
		return strings.Contains(lower, "gain") || strings.Contains(lower, "itunnorm") || strings.Contains(lower, "encoder") || strings.Contains(lower, "peakvalue")
	})
	return strings.Join(lines, "\n")
}

// Without tags in the source there are none in the copy.
func TestMP3WithoutTags(t *testing.T) {
	box := withFFmpeg(t)
	dir := t.TempDir()
	source, path := filepath.Join(dir, "a.mp3"), filepath.Join(dir, "b.mp3")
	snd := programme(2, 9000, 16, 0.5)
	run(t, "lame", "--quiet", writeWAV(t, snd, 44100), source)
	write(t, box, path, Spec{Container: "mp3", Codec: "mp3", Format: stereo(44100), BitRate: 128_000, TagsFrom: source}, snd)
	if file := load(t, path); file[0] != 0xFF || parseMPEG(file).layer != 3 {
		t.Errorf("it begins with %q", file[:20])
	}
}

// Tags far larger than usual, several in a row, and both with junk behind them, are carried to the last byte.
func TestMP3HugeTags(t *testing.T) {
	t.Parallel()
	box := withFFmpeg(t)
	bare := mp3Source(t, 0)
	snd, info := decode(t, box, bare)
	tag := func(size int) []byte { // one frame (ID3v2.3.0, 3.1 and 3.3)
		head := []byte{'I', 'D', '3', 3, 0, 0, byte((size + 10) >> 21), byte((size + 10) >> 14 & 127), byte((size + 10) >> 7 & 127), byte((size + 10) & 127)}
		return slices.Concat(head, []byte{'P', 'R', 'I', 'V', byte(size >> 24), byte(size >> 16), byte(size >> 8), byte(size), 0, 0},
			bytes.Repeat([]byte("x\x00\xFF\xFB\x90\x00"), size/6+1)[:size])
	}
	tags := slices.Concat(tag(30<<20), tag(5))
	source, path := save(t, "source.mp3", slices.Concat(tags, make([]byte, 500), load(t, bare))), filepath.Join(t.TempDir(), "copy.mp3")
	spec := box.SpecFor(info, Wish{})
	spec.TagsFrom = source
	write(t, box, path, spec, snd)
	if got := load(t, path); !bytes.HasPrefix(got, tags) || parseMPEG(got[len(tags):]).layer != 3 {
		t.Errorf("it begins with %q", got[:50])
	}
	if got, _ := decode(t, box, path); got.Frames() != snd.Frames() {
		t.Errorf("%d frames of %d", got.Frames(), snd.Frames())
	}
}

// soundMD5 is the sum of all packets of a file, as FFmpeg cuts it into them.
func soundMD5(t testing.TB, path string) string {
	t.Helper()
	return string(run(t, "ffmpeg", "-v", "error", "-i", path, "-map", "0:a", "-c", "copy", "-f", "md5", "-"))
}

// Gain tags are written anew, whatever there was; every other field and every packet of the sound stays.
func TestRetagMP3(t *testing.T) {
	t.Parallel()
	box := withFFmpeg(t)
	g := tags.Gains{Track: tags.Loudness{Integrated: -10.11, Peak: -1}, Album: &tags.Loudness{Integrated: -12, Peak: 0.5}}
	for _, version := range []int{0, 2, 3, 4} {
		source, path, again := mp3Source(t, version), filepath.Join(t.TempDir(), "a.mp3"), filepath.Join(t.TempDir(), "b.mp3")
		for _, step := range [][2]string{{source, path}, {path, again}} {
			if err := box.Retag(t.Context(), step[0], step[1], g); err != nil {
				t.Fatal(err)
			}
		}
		if !bytes.Equal(load(t, path), load(t, again)) {
			t.Errorf("2.%d: with the same tags again, the file differs", version)
		}
		if soundMD5(t, source) != soundMD5(t, path) {
			t.Errorf("2.%d: the sound has changed", version)
		}
		want, got := dumped(t, source), dumped(t, path)
		for key := range want {
			if strings.Contains(strings.ToUpper(key), "REPLAYGAIN") || strings.HasPrefix(key, "RVA2") {
				delete(want, key)
			}
		}
		for key, value := range want {
			value = strings.ReplaceAll(strings.ReplaceAll(value, "offset=500", "offset=4294967295"), "offset=900", "offset=4294967295")
			if got[key] != value && version > 0 {
				t.Errorf("2.%d: %s is %.200s, was %.200s", version, key, got[key], value)
			}
		}
		for _, pair := range g.ReplayGain() {
			if value := got["TXXX:"+pair[0]]; !strings.Contains(value, "'"+pair[1]+"'") {
				t.Errorf("2.%d: %s is %s", version, pair[0], value)
			}
			if value := got["APE "+pair[0]]; version > 2 != strings.Contains(value, pair[1]) {
				t.Errorf("2.%d: APEv2's %s is %q", version, pair[0], value)
			}
		}
		if extra := len(got) - len(want); version > 2 && extra != 8 || version == 2 && extra != 4 || version == 0 && extra != 5 { // a version, too
			t.Errorf("2.%d: %d fields of %d: %v", version, len(got), len(want), slices.Sorted(maps.Keys(got)))
		}
		if side := string(run(t, "ffprobe", "-v", "error", "-show_entries", "stream_side_data", "-of", "flat", path)); version != 2 && !strings.Contains(side, "Replay Gain") {
			t.Errorf("2.%d: ffprobe sees no gain: %s", version, side)
		}
	}
}

// ADTS gets an ID3v2 tag in front, as is usual for it.
func TestRetagADTS(t *testing.T) {
	dir := t.TempDir()
	source, path := filepath.Join(dir, "a.aac"), filepath.Join(dir, "b.aac")
	run(t, "ffmpeg", "-v", "error", "-i", writeWAV(t, programme(2, 30_000, 16, 0.5), 44100), source)
	if err := withFFmpeg(t).Retag(t.Context(), source, path, tags.Gains{Track: tags.Loudness{Integrated: -20, Peak: -3}}); err != nil {
		t.Fatal(err)
	}
	if _, found := ffprobe(t, path); soundMD5(t, source) != soundMD5(t, path) || found["REPLAYGAIN_TRACK_GAIN"] != "2.00 dB" {
		t.Errorf("%v", found)
	}
}

// An APEv2 tag in front of the sound, with a picture in it that looks like sound, is passed over.
func TestAPEInFront(t *testing.T) {
	source := mp3Source(t, 0)
	file := load(t, source)
	file = file[:bytes.Index(file, []byte("APETAGEX"))]
	want, info := decode(t, withFFmpeg(t), save(t, "a.mp3", file))
	for _, size := range []int{100, 100_000, 500_000} {
		cover := bytes.Repeat([]byte("\xFF\xFB\x90\x00a picture"), size/13)
		item := slices.Concat([]byte(u32(int64(len(cover)))), []byte("\x02\x00\x00\x00Cover Art (Front)\x00"), cover)
		edge := func(flags int64) []byte {
			return []byte("APETAGEX" + u32(2000) + u32(int64(len(item)+32)) + u32(1) + u32(flags) + "\x00\x00\x00\x00\x00\x00\x00\x00")
		}
		path := save(t, "b.mp3", slices.Concat(edge(1<<31|1<<29), item, edge(1<<31), file))
		for _, box := range []*Toolbox{withFFmpeg(t), withoutFFmpeg()} {
			got, is := decode(t, box, path)
			if got.Frames() != want.Frames() || is.Frames != info.Frames || is.BitRate != info.BitRate {
				t.Errorf("%d bytes by %s: %d frames of %d, %+v", size, is.Decoder, got.Frames(), want.Frames(), is)
			}
		}
	}
}
