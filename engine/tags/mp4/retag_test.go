package mp4

import (
	"bytes"
	"regexp"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/tags"
)

var gains = tags.Gains{Track: tags.Loudness{Integrated: -10.11, Peak: 0.5}, Album: &tags.Loudness{Integrated: -12, Peak: 1}}

// films and recordings in every order of boxes that FFmpeg writes.
var madeFiles = map[string][]string{
	"back.m4a":        {"-map", "0", "-c:a", "aac"},
	"front.m4a":       {"-map", "0", "-c:a", "aac", "-movflags", "+faststart"},
	"reserved.m4a":    {"-map", "0", "-c:a", "alac", "-moov_size", "40000"},
	"front.mp4":       {"-map", "0", "-map", "1", "-c:v", "mpeg4", "-c:a", "aac", "-movflags", "+faststart"},
	"front.mov":       {"-map", "0", "-map", "1", "-c:v", "mpeg4", "-c:a", "pcm_s16le", "-movflags", "+faststart"},
	"back.mov":        {"-map", "0", "-map", "1", "-c:v", "mpeg4", "-c:a", "aac"},
	"keys.mp4":        {"-map", "0", "-c:a", "aac", "-movflags", "+faststart+use_metadata_tags", "-metadata", "replaygain_track_gain=0 dB", "-metadata", "other=kept"},
	"fragments.mp4":   {"-map", "0", "-c:a", "aac", "-movflags", "empty_moov+frag_keyframe", "-frag_duration", "500000"},
	"base.mp4":        {"-map", "0", "-c:a", "aac", "-movflags", "empty_moov+default_base_moof", "-frag_duration", "500000"},
	"dash.mp4":        {"-map", "0", "-c:a", "aac", "-movflags", "dash+global_sidx", "-frag_duration", "500000"},
	"film frags.mp4":  {"-map", "0", "-map", "1", "-c:v", "mpeg4", "-c:a", "aac", "-movflags", "empty_moov+frag_keyframe"},
	"no metadata.m4a": {"-map", "0", "-c:a", "aac", "-movflags", "+faststart", "-map_metadata", "-1", "-fflags", "+bitexact"},
}

// sideData is what FFmpeg adds to a packet's line of the file's tags, gains among them.
var sideData = regexp.MustCompile(", S=.*")

// packets is what FFmpeg says of the sound, the pictures and their times.
func packets(t testing.TB, path string) string {
	return sideData.ReplaceAllString(run(t, "ffmpeg", "-v", "error", "-i", path, "-map", "0", "-c", "copy", "-f", "framehash", "-"), "") +
		run(t, "ffmpeg", "-v", "error", "-i", path, "-map", "0:a", "-f", "md5", "-")
}

func formatTags(t testing.TB, path string) []string {
	lines := strings.Split(run(t, "ffprobe", "-v", "error", "-show_entries", "format_tags", "-of", "default=nw=1", path), "\n")
	slices.Sort(lines)
	return slices.Compact(lines)
}

// Gain tags are the only thing that changes, by the word of FFmpeg, and doing it again changes nothing.
func TestRetag(t *testing.T) {
	t.Parallel()
	for name, args := range madeFiles {
		path := made(t, name, args...)
		before, packetsBefore, tagsBefore := load(t, path), packets(t, path), formatTags(t, path)
		after, err := retag(before, gains)
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		save(t, path, after)
		if got := packets(t, path); got != packetsBefore {
			t.Errorf("%s: the packets are\n%.600s\nnot\n%.600s", name, got, packetsBefore)
		}
		want := slices.DeleteFunc(tagsBefore, func(s string) bool { return strings.Contains(s, "replaygain") })
		for _, pair := range gains.ReplayGain() {
			want = append(want, "TAG:"+strings.ToLower(pair[0])+"="+pair[1])
		}
		slices.Sort(want)
		if got := formatTags(t, path); !slices.Equal(got, want) {
			t.Errorf("%s: tags %q, want %q", name, got, want)
		}
		if again, err := retag(after, gains); err != nil || !bytes.Equal(again, after) {
			t.Errorf("%s: doing it again changes it: %v", name, err)
		}
		// Another level of as many digits, or fewer, moves nothing.
		for _, level := range []tags.Loudness{{Integrated: -11.22, Peak: 0}, {Integrated: -9, Peak: -3}} {
			if again, err := retag(after, tags.Gains{Track: level, Album: &level}); err != nil || strings.HasPrefix(name, "front") && len(again) != len(after) {
				t.Errorf("%s: %d bytes, not %d: %v", name, len(again), len(after), err)
			}
		}
	}
}

// Free space is used up before anything moves, be it inside the movie box or behind it.
func TestRetagUsesFreeSpace(t *testing.T) {
	t.Parallel()
	for name, holder := range map[string][]string{"meta": {"udta", "meta"}, "udta": {"udta"}, "moov": {}, "behind": nil} {
		path := made(t, "a.m4a", "-map", "0", "-c:a", "aac", "-movflags", "+faststart")
		f, err := open(bytes.NewReader(load(t, path)), int64(len(load(t, path))))
		if err != nil {
			t.Fatal(err)
		}
		file := load(t, path)
		m, at := move{f.spans[f.movie].end(), 3000}, f.spans[f.movie]
		if err := m.movie(f.moov); err != nil {
			t.Fatal(err)
		}
		list := []*box{f.moov}
		if name == "behind" {
			list = append(list, freeBox(3000))
		} else {
			x := f.moov.child(holder...)
			x.kids = append(x.kids, freeBox(3000))
		}
		file = slices.Concat(file[:at.at], written(t, list...), file[at.end():])
		save(t, path, file)
		before := packets(t, path)
		after, err := retag(file, gains)
		if err != nil || len(after) != len(file) {
			t.Errorf("%s: %d bytes, not %d: %v", name, len(after), len(file), err)
			continue
		}
		sound := bytes.Index(file, []byte("mdat"))
		if save(t, path, after); !bytes.Equal(after[sound:], file[sound:]) || packets(t, path) != before {
			t.Errorf("%s: the sound has moved", name)
		}
	}
}

// mutagen finds the new gains and everything else that it had put there.
func TestRetagByMutagen(t *testing.T) {
	t.Parallel()
	const put = `
import sys
from mutagen.mp4 import MP4, MP4Cover, MP4FreeForm
f = MP4(sys.argv[1])
if f.tags is None: f.add_tags()
f["\xa9nam"], f["trkn"], f["covr"] = ["N"], [(1, 2)], [MP4Cover(b"\xff\xd8\xff" + bytes(40000)), MP4Cover(b"\x89PNG\r\n\x1a\n", 14)]
for name in ("REPLAYGAIN_TRACK_GAIN", "replaygain_album_peak", "testNORM", "mood"): f["----:org.example:" + name] = [b"old"]
f.save()`
	const tell = `
import sys, zlib
from mutagen.mp4 import MP4
for k, v in sorted(MP4(sys.argv[1]).tags.items()): print(ascii(k), [(bytes(x), int(x.dataformat)) if hasattr(x, "dataformat") else (zlib.crc32(bytes(x)), x.imageformat) if hasattr(x, "imageformat") else x for x in v] if isinstance(v, list) else v)`
	for _, name := range []string{"back.m4a", "front.m4a", "front.mov"} {
		path := made(t, name, madeFiles[name]...)
		run(t, "/usr/bin/python3", "-c", put, path)
		lines := strings.Split(run(t, "/usr/bin/python3", "-c", tell, path), "\n")
		want := slices.DeleteFunc(lines, func(s string) bool { return strings.Contains(strings.ToLower(s), "replaygain") })
		after, err := retag(load(t, path), gains)
		if err != nil {
			t.Fatal(err)
		}
		save(t, path, after)
		got := strings.Split(run(t, "/usr/bin/python3", "-c", tell, path), "\n")
		for _, pair := range gains.ReplayGain() {
			want = append(want, "'----:"+freeform+":"+strings.ToLower(pair[0])+"' [(b'"+pair[1]+"', 1)]")
		}
		slices.Sort(got)
		slices.Sort(want)
		if !slices.Equal(got, want) || len(got) < 10 {
			t.Errorf("%s:\n%s\nnot\n%s", name, strings.Join(got, "\n"), strings.Join(want, "\n"))
		}
	}
}

// What cannot be moved is refused, with the reason; where nothing has to move it is not.
func TestRetagRefuses(t *testing.T) {
	whole := load(t, made(t, "a.m4a", madeFiles["front.m4a"]...))
	at := bytes.Index(whole, []byte("moov")) - 4
	sidx := slices.Concat(whole[:at], written(t, &box{kind: "sidx", body: make([]byte, 24)}), whole[at:])
	elsewhere := bytes.Clone(whole)
	elsewhere[bytes.Index(whole, []byte("url \x00\x00\x00\x01"))+7] = 0
	items := slices.Concat(whole, written(t, &box{kind: "meta", body: full(0), kids: []*box{{kind: "iloc", body: make([]byte, 8)}}}))
	broken := bytes.Clone(whole)
	broken[bytes.Index(whole, []byte("ilst"))+4] = 0x7F
	for reason, file := range map[string][]byte{
		"sidx": sidx, "another file": elsewhere, "found by their place": items, "cannot be read": broken,
		"longer than the file": whole[:len(whole)-100], "no movie box": whole[:at], "damaged": whole[:at+200],
	} {
		if _, err := retag(file, gains); err == nil || !strings.Contains(err.Error(), reason) {
			t.Errorf("%s: %v", reason, err)
		}
	}
}

// Offsets that pass 4 GiB are written in 64 bits: 2^32 − 16 moved by 20 is 2^32 + 4.
func TestOffsetsBeyond4GiB(t *testing.T) {
	stco := &box{kind: "stco", body: []byte{0, 0, 0, 0, 0, 0, 0, 2, 0, 0, 1, 0, 0xFF, 0xFF, 0xFF, 0xF0}}
	stbl := &box{kind: "stbl", kids: []*box{stco}}
	moov := &box{kind: "moov", kids: []*box{{kind: "trak", kids: []*box{{kind: "mdia", kids: []*box{{kind: "minf", kids: []*box{stbl}}}}}}}}
	m := move{from: 300, by: 20}
	if grown, err := m.makeRoom(moov); err != nil || !grown {
		t.Fatal(grown, err)
	}
	if grown, err := m.makeRoom(moov); err != nil || grown || m.movie(moov) != nil {
		t.Fatal(grown, err)
	}
	want := []byte{0, 0, 0, 0x20, 'c', 'o', '6', '4', 0, 0, 0, 0, 0, 0, 0, 2, 0, 0, 0, 0, 0, 0, 1, 0, 0, 0, 0, 1, 0, 0, 0, 4}
	if got := written(t, stco); !bytes.Equal(got, want) {
		t.Errorf("% x", got)
	}
}
