package media

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// bextRead reads the bext chunk of a WAV by the table of EBU Tech 3285, in another language.
const bextRead = `
import json, struct, sys
b = open(sys.argv[1], "rb").read()
at = b.index(b"bext")
n, = struct.unpack("<I", b[at+4:at+8])
f = struct.unpack("<256s32s32s10s8sIIH64s5h180s", b[at+8:at+8+602])
print(json.dumps({"version": f[7], "umid": f[8].hex(), "figures": f[9:14], "reserved": f[14].hex(), "low": f[5],
  "description": f[0].rstrip(b"\0").decode(), "history": b[at+8+602:at+8+n].decode()}))
`

type bextFields struct {
	Version, Low         int
	Umid, Reserved       string
	Figures              [5]int
	Description, History string
}

func readBext(t *testing.T, path string) (b bextFields) {
	t.Helper()
	if err := json.Unmarshal(run(t, "/usr/bin/python3", "-c", bextRead, path), &b); err != nil {
		t.Fatal(err)
	}
	return b
}

// bextOf is the body of a bext chunk whose bytes from the UMID on are given.
func bextOf(version int, rest string) string {
	return "Evening talk" + strings.Repeat("\x00", 244) + strings.Repeat("O", 64) + "2026-12-0112:00:00" + u32(4711) + u32(0) + u16(version) + rest
}

func TestBext(t *testing.T) {
	umid, figures, room := strings.Repeat("\x06", 64), "\x01\x02\x03\x04\x05\x06\x07\x08\x09\x0A", strings.Repeat("\x00", 180)
	const line, old = "A=PCM,F=48000,W=24,M=stereo,T=Evenshelf engine 3; talk\r\n", "A=ANALOGUE,M=stereo,T=Tape\r\n"
	for name, test := range map[string]struct{ in, history string }{
		"version 2":                      {bextOf(2, umid+figures+room+old), old + line},
		"version 1":                      {bextOf(1, umid+figures+room+old), old + line},
		"version 0, rubbish in reserve":  {bextOf(0, strings.Repeat("R", 64)+figures+room), line},
		"history without an end of line": {bextOf(2, umid+figures+room+"A=PCM"), "A=PCM\r\n" + line},
		"half an end of line":            {bextOf(2, umid+figures+room+"A=PCM\r"), "A=PCM\r\n" + line},
		"line feeds alone":               {bextOf(2, umid+figures+room+"A=PCM\n"), "A=PCM\n" + line},
		"history that ends with a zero":  {bextOf(2, umid+figures+room+old+"\x00"), old + line + "\x00"},
		"room for more":                  {bextOf(2, umid+figures+room+old+strings.Repeat("\x00", 100)), old + line + strings.Repeat("\x00", 100-len(line))},
		"nothing but room":               {bextOf(2, umid+figures+room+strings.Repeat("\x00", 10)), line + "\x00"},
	} {
		source := save(t, "a.wav", riffFile(riffChunk("bext", test.in), plainFmt(1, 2, 48000, 24, 3), riffChunk("data", "123456"), riffChunk("cue ", "abcd")))
		path := t.TempDir() + "/b.wav"
		spec := wavSpec(24, false)
		spec.Format, spec.TagsFrom, spec.History = stereo(48000), source, "Evenshelf engine 3, talk"
		snd := programme(2, 101, 24, 0.5)
		write(t, withoutFFmpeg(), path, spec, snd)
		got := readBext(t, path)
		want := bextFields{Version: 2, Low: 4711, Umid: strings.Repeat("06", 64), Reserved: strings.Repeat("00", 180), Description: "Evening talk", History: test.history}
		if name[:9] == "version 0" {
			want.Umid = strings.Repeat("00", 64)
		}
		want.Figures = [5]int{noFigure, noFigure, noFigure, noFigure, noFigure}
		if got != want {
			t.Errorf("%s: got %+v\nwant %+v", name, got, want)
		}
		sameChunks(t, path, source, append(ofTheSamples, "bext")...)

		// The first three are the examples of Tech 3285, 2.4, from memory: −22.644, −22.645 and −22.646.
		size := len(load(t, path))
		for _, stamp := range []struct {
			l    Loudness
			want [5]int
		}{
			{Loudness{-22.644, 0, -22.645, -22.646, 12.3}, [5]int{-2264, 0, -2265, -2265, 1230}},
			{Loudness{-23, 5.126, -1.004, -18.25, audio.LUFS(math.Inf(-1))}, [5]int{-2300, 513, -100, -1825, noFigure}},
			{Loudness{-400, 400, 327.67, -327.68, 0}, [5]int{noFigure, noFigure, noFigure, -32768, 0}},
			{nothingKnown, want.Figures},
		} {
			if err := Stamp(path, stamp.l); err != nil {
				t.Fatal(err)
			}
			want.Figures = stamp.want
			if got := readBext(t, path); got != want {
				t.Errorf("%s: stamped %+v\nwant %+v", name, got, want)
			}
		}
		again, _ := decode(t, withoutFFmpeg(), path)
		sameSound(t, again, snd)
		if len(load(t, path)) != size {
			t.Errorf("%s: the stamp changed the length", name)
		}
	}
}

// FFmpeg shows all of bext but the figures.
func TestBextReadByFFprobe(t *testing.T) {
	source := save(t, "a.wav", riffFile(riffChunk("bext", bextOf(1, strings.Repeat("\x00", 254))), plainFmt(1, 1, 48000, 16, 2), riffChunk("data", "12")))
	path := t.TempDir() + "/b.wav"
	spec := wavSpec(16, false)
	spec.Format, spec.TagsFrom, spec.History = audio.Format{Rate: 48000, Layout: audio.Mono}, source, "x"
	write(t, withoutFFmpeg(), path, spec, programme(1, 100, 16, 0.5))
	if err := Stamp(path, Loudness{-23.01, 7.5, -1.25, -15, -20}); err != nil {
		t.Fatal(err)
	}
	_, tags := ffprobe(t, path)
	for name, want := range map[string]string{"comment": "Evening talk", "time_reference": "4711", "coding_history": "A=PCM,F=48000,W=16,M=mono,T=x\r\n"} {
		if tags[name] != want {
			t.Errorf("%s is %q, want %q; all: %v", name, tags[name], want, tags)
		}
	}
}

// Without a bext chunk of full length there is nothing to stamp: no byte changes, and none gets one.
func TestStampLeavesOthersAlone(t *testing.T) {
	l := Loudness{-23, 5, -1, -18, -20}
	for name, file := range map[string][]byte{
		"x.wav":     riffFile(plainFmt(1, 1, 48000, 16, 2), riffChunk("data", "12")),
		"short.wav": riffFile(riffChunk("bext", "short"), plainFmt(1, 1, 48000, 16, 2), riffChunk("data", "12")),
		"x.flac":    load(t, save(t, "y", formats(t)["flac"])),
	} {
		path := save(t, name, file)
		if err := Stamp(path, l); err != nil {
			t.Errorf("%s: %v", name, err)
		}
		if string(load(t, path)) != string(file) {
			t.Errorf("%s was changed", name)
		}
	}
	for _, path := range []string{t.TempDir() + "/none.wav", save(t, "x.wav", []byte("RIFF\x00\x00\x00\x00WAVE"))} {
		if err := Stamp(path, l); err == nil || !strings.HasPrefix(err.Error(), path+": ") {
			t.Errorf("%s: %v", path, err)
		}
	}
	if _, err := os.Stat(t.TempDir() + "/none.wav"); err == nil {
		t.Error("a file was made")
	}
}

// The gains in the ID3 tag of a WAV and of an AIFF go, what else it says stays: mutagen reads both before and after.
func TestID3InChunksLosesItsGains(t *testing.T) {
	box, dir := withFFmpeg(t), t.TempDir()
	wav := writeWAV(t, programme(2, 4000, 16, 0.5), 44100)
	for name, kind := range map[string]string{"a.wav": "wave.WAVE", "a.aiff": "aiff.AIFF"} {
		source, path := filepath.Join(dir, name), filepath.Join(dir, "copy-"+name)
		run(t, "ffmpeg", "-v", "error", "-i", wav, source)
		run(t, "/usr/bin/python3", "-c", `
import sys, mutagen.wave, mutagen.aiff, mutagen.id3 as i
a = mutagen.`+kind+`(sys.argv[1]); a.add_tags()
for f in [i.TIT2(3, ['T']), i.TXXX(3, 'replaygain_track_gain', ['-3.00 dB']), i.RVA2('x', 1, -3, 1), i.TXXX(3, 'mood', ['calm'])]: a.tags.add(f)
a.save()`, source)
		level(t, box, source, path)
		said := func(path string) string {
			return string(run(t, "/usr/bin/python3", "-c", "import sys, mutagen.wave, mutagen.aiff; print(sorted(mutagen."+kind+"(sys.argv[1]).tags.keys()))", path))
		}
		if got := said(source); !strings.Contains(got, "RVA2") || !strings.Contains(got, "replaygain") {
			t.Fatalf("%s before: %s", name, got)
		}
		if got := said(path); got != "['TIT2', 'TXXX:mood']\n" {
			t.Errorf("%s after: %s", name, got)
		}
	}
}
