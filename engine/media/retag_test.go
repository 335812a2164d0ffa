package media

import (
	"bytes"
	"context"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/tags"
)

// someGains are worked by hand: −18 − (−10.11), −18 − (−12); 256 · (−23 − L); 10^(dBTP/20).
var someGains = tags.Gains{Track: tags.Loudness{Integrated: -10.11, Peak: -6}, Album: &tags.Loudness{Integrated: -12, Peak: 0}}

var (
	replayGains = []string{"REPLAYGAIN_TRACK_GAIN=-7.89 dB", "REPLAYGAIN_TRACK_PEAK=0.501187", "REPLAYGAIN_ALBUM_GAIN=-6.00 dB", "REPLAYGAIN_ALBUM_PEAK=1.000000"}
	r128Gains   = []string{"R128_TRACK_GAIN=-3300", "R128_ALBUM_GAIN=-2816"}
)

// retag writes gain tags, twice: the second time changes nothing.
func retag(t testing.TB, source string) string {
	t.Helper()
	box, dir := withoutFFmpeg(), t.TempDir()
	once, twice := filepath.Join(dir, "once"), filepath.Join(dir, "twice")
	for _, pair := range [][2]string{{source, once}, {once, twice}} {
		if err := box.Retag(context.Background(), pair[0], pair[1], someGains); err != nil {
			t.Fatal(err)
		}
	}
	if !bytes.Equal(load(t, once), load(t, twice)) {
		t.Error("tags that are right already were changed")
	}
	return once
}

// packets is the hash of the packets of sound, as FFmpeg takes them out of the file without decoding.
func packets(t testing.TB, path string) string {
	t.Helper()
	return string(run(t, "ffmpeg", "-v", "error", "-i", path, "-map", "0:a", "-c", "copy", "-f", "md5", "-"))
}

// without drops the gain tags of a list. It knows them by the names in these tests.
func without(list []string) []string {
	return slices.DeleteFunc(slices.Clone(list), func(e string) bool {
		e = strings.ToUpper(e)
		return strings.HasPrefix(e, "REPLAYGAIN_") || strings.HasPrefix(e, "R128_")
	})
}

func TestRetagFLAC(t *testing.T) {
	source := fullFLAC(t, writeWAV(t, programme(2, 50_001, 16, 0.5), 44100), load(t, cover(t)))
	id3 := append([]byte("ID3\x04\x00\x00\x00\x00\x00\x14"), make([]byte, 20)...)
	behind := append([]byte("TAG"), make([]byte, 125)...)
	for name, frame := range map[string][2][]byte{"plain": {}, "between other tags": {id3, behind}} {
		whole := slices.Concat(frame[0], load(t, source), frame[1])
		path := retag(t, save(t, "x.flac", whole))
		got := load(t, path)
		if !bytes.HasPrefix(got, frame[0]) || !bytes.HasSuffix(got, frame[1]) {
			t.Fatalf("%s: what is around it has changed", name)
		}
		got = got[len(frame[0]) : len(got)-len(frame[1])]
		if err := os.WriteFile(path, got, 0o644); err != nil {
			t.Fatal(err)
		}
		run(t, "flac", "-t", "-s", "--warnings-as-errors", path)
		vendor, was := entries(t, source)
		if v, list := entries(t, path); v != vendor || !slices.Equal(list, append(without(was), replayGains...)) {
			t.Errorf("%s: %s, %q", name, v, list)
		}
		before, sound := flacBlocks(t, load(t, source))
		after, sound2 := flacBlocks(t, got)
		same := func(a, b []byte) bool { return a[0] == 4 && b[0] == 4 || bytes.Equal(a, b) }
		if !slices.EqualFunc(before, after, same) || !bytes.Equal(load(t, source)[sound:], got[sound2:]) {
			t.Errorf("%s: more than the comments has changed", name)
		}
	}
	// Where there are no comments, some are made.
	blocks, at := flacBlocks(t, load(t, source))
	path := retag(t, save(t, "x.flac", flacOf(blocks[:1], load(t, source)[at:])))
	run(t, "flac", "-t", "-s", path)
	if vendor, list := entries(t, path); vendor != "evenshelf" || !slices.Equal(list, replayGains) {
		t.Errorf("%s, %q", vendor, list)
	}
}

// oggWithPicture is an Ogg file with comments of all sorts and a picture of some megabytes, which runs over many pages.
func oggWithPicture(t testing.TB, codec string) string {
	t.Helper()
	wav := writeWAV(t, noise(2, 100_001), 48000)
	image := filepath.Join(t.TempDir(), "big.jpg")
	if err := os.WriteFile(image, append(load(t, cover(t)), make([]byte, 3<<20)...), 0o644); err != nil {
		t.Fatal(err)
	}
	args := []string{"--comment", "ARTIST=One", "--comment", "Artist=Two", "--comment", "CHAPTER001=00:00:00.000", "--comment", "REPLAYGAIN_TRACK_GAIN=-1.00 dB", "--comment", "r128_track_gain=7"}
	if codec == "opus" {
		return oggSource(t, codec, wav, append(args, "--picture", "3|image/jpeg|Front||"+image, "--comment", "LAST=x", "--padding", "700")...)
	}
	path := oggSource(t, codec, wav, args...)
	run(t, "/usr/bin/python3", "-c", `
import sys, base64, mutagen, mutagen.flac
p = mutagen.flac.Picture(); p.type = 3; p.mime = 'image/jpeg'; p.desc = 'Front'; p.data = open(sys.argv[2], 'rb').read()
f = mutagen.File(sys.argv[1])
f.tags.append(('METADATA_BLOCK_PICTURE', base64.b64encode(p.write()).decode()))
f.tags.append(('LAST', 'x'))
f.save()
`, path, image)
	return path
}

func TestRetagOgg(t *testing.T) {
	for codec, gains := range map[string][]string{"vorbis": replayGains, "opus": r128Gains} {
		source := oggWithPicture(t, codec)
		path := retag(t, source)
		vendor, was := entries(t, source)
		if v, list := entries(t, path); v != vendor || len(was) < 7 || !slices.Equal(list, append(without(was), gains...)) {
			t.Errorf("%s: %s, %d entries", codec, v, len(list))
		}
		if packets(t, path) != packets(t, source) {
			t.Errorf("%s: packets have changed", codec)
		}
		inOrder(t, codec, path)
		if codec == "vorbis" {
			if out := string(run(t, "vorbiscomment", "-R", "-l", path)); !strings.HasSuffix(out, strings.Join(gains, "\n")+"\n") {
				t.Errorf("vorbiscomment: %.500s", out)
			}
		}
	}
}

// inOrder has the codec's own checker look at an Ogg file: page numbers, checksums, granule positions.
func inOrder(t testing.TB, codec, path string) {
	t.Helper()
	tool := map[string]string{"vorbis": "ogginfo", "opus": "opusinfo"}[codec]
	if out := string(run(t, tool, path)); strings.Contains(strings.ToUpper(out), "WARNING") || strings.Contains(strings.ToUpper(out), "ERROR") {
		t.Errorf("%s: %.500s", tool, out)
	}
}

// A levelled copy carries the comments and the picture, and FFmpeg's packets as they were.
func TestOggCommentsAreCarried(t *testing.T) {
	box := withFFmpeg(t)
	for _, codec := range []string{"vorbis", "opus"} {
		source, path := oggWithPicture(t, codec), filepath.Join(t.TempDir(), "x")
		level(t, box, source, path)
		_, was := entries(t, source)
		if _, list := entries(t, path); len(was) < 7 || !slices.Equal(list, without(was)) {
			t.Errorf("%s: %d entries, want %d", codec, len(list), len(was)-2)
		}
		inOrder(t, codec, path)
		bare := filepath.Join(t.TempDir(), "bare")
		snd, info := decode(t, box, source)
		write(t, box, bare, box.SpecFor(info, Wish{}), snd) // by FFmpeg alone
		if packets(t, path) != packets(t, bare) {
			t.Errorf("%s: packets have changed", codec)
		}
	}
}

// Each link of a chained file gets its tags.
func TestRetagChain(t *testing.T) {
	for codec, gains := range map[string][]string{"vorbis": replayGains, "opus": r128Gains} {
		wav := writeWAV(t, noise(2, 60_000), 48000)
		var chain, links []byte
		for _, n := range []string{"1", "2", "3"} {
			link := load(t, oggSource(t, codec, wav, "--serial", n, "--comment", "TITLE=Part "+n, "--comment", "R128_ALBUM_GAIN=3"))
			chain = append(chain, link...)
			links = append(links, load(t, retag(t, save(t, "x", link)))...)
		}
		path := retag(t, save(t, "x", chain))
		if !bytes.Equal(load(t, path), links) {
			t.Errorf("%s: a chain is not its links", codec)
		}
		inOrder(t, codec, path)
		out := string(run(t, map[string]string{"vorbis": "ogginfo", "opus": "opusinfo"}[codec], path))
		if strings.Count(out, gains[0]) != 3 || strings.Contains(out, "R128_ALBUM_GAIN=3") || !strings.Contains(out, "TITLE=Part 3") {
			t.Errorf("%s: %s", codec, out)
		}
	}
}

// What cannot be written anew without hiding its damage is refused, and nothing is left behind.
func TestRetagRefusesDamage(t *testing.T) {
	whole := load(t, oggSource(t, "vorbis", writeWAV(t, noise(2, 60_000), 48000)))
	turned := slices.Clone(whole)
	turned[len(turned)-9] ^= 1
	flac := load(t, fullFLAC(t, writeWAV(t, noise(2, 9000), 48000), load(t, cover(t))))
	for name, b := range map[string][]byte{
		"cut in a page": whole[:len(whole)-5], "cut in the headers": whole[:1000], "a wrong bit": turned,
		"something behind": append(slices.Clone(whole), "behind"...), "FLAC cut in its blocks": flac[:200],
	} {
		source, path := save(t, "x", b), filepath.Join(t.TempDir(), "y")
		err := withoutFFmpeg().Retag(context.Background(), source, path, someGains)
		if err == nil || !strings.HasPrefix(err.Error(), source) {
			t.Errorf("%s: %v", name, err)
		}
		if _, e := os.Stat(path); e == nil {
			t.Errorf("%s: a file is left", name)
		}
	}
}
