package media

import (
	"bytes"
	"encoding/json"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/engine/audio"
)

// makeFilm makes a film by FFmpeg: pictures with frames that refer forward, two sound tracks of noise with languages,
// subtitles that begin late and are few, chapters, and what else its container takes.
func makeFilm(t testing.TB, name string, more ...string) string {
	t.Helper()
	dir := t.TempDir()
	file := func(name, text string) string {
		path := filepath.Join(dir, name)
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		return path
	}
	srt := file("a.srt", "1\n00:00:03,500 --> 00:00:04,000\nLate\n")
	chapters := file("chapters.txt", ";FFMETADATA1\ntitle=Two rivers\n[CHAPTER]\nTIMEBASE=1/1000\nSTART=0\nEND=3000\ntitle=One\n[CHAPTER]\nTIMEBASE=1/1000\nSTART=3000\nEND=6000\ntitle=Two\n")
	font, picture := file("a.ttf", "not really a font"), filepath.Join(dir, "cover.png")
	run(t, "ffmpeg", "-v", "error", "-f", "lavfi", "-i", "color=red:s=32x32", "-frames:v", "1", picture)
	noise := "anoisesrc=d=6:r=48000:a=0.2:c=pink:seed="
	args := []string{"-v", "error", "-f", "lavfi", "-i", "testsrc2=s=160x120:r=25:d=6", "-f", "lavfi", "-i", noise + "1",
		"-f", "lavfi", "-i", noise + "2", "-i", srt, "-i", chapters}
	maps := []string{"-map", "0", "-map", "1", "-map", "2"}
	var tail []string
	switch filepath.Ext(name) {
	case ".mkv":
		maps = append(maps, "-map", "3")
		tail = append(tail, "-c:s", "srt", "-attach", font, "-metadata:s:t:0", "mimetype=font/ttf", "-metadata:s:t:0", "filename=a.ttf",
			"-attach", picture, "-metadata:s:t:1", "mimetype=image/png", "-metadata:s:t:1", "filename=cover.png")
	case ".webm":
		tail = append(tail, "-c:v", "libvpx", "-b:v", "200k")
	default:
		args, maps = append(args, "-i", picture), append(maps, "-map", "3", "-map", "5")
		tail = append(tail, "-c:s", "mov_text", "-c:v:1", "copy", "-disposition:v:1", "attached_pic")
	}
	args = append(append(args, maps...), "-map_metadata", "4", "-map_chapters", "4", "-c:v:0", "libx264", "-preset", "ultrafast", "-bf", "2", "-ac", "2",
		"-metadata:s:a:0", "language=deu", "-metadata:s:a:1", "language=eng", "-metadata:s:a:0", "title=Main", "-metadata:s:s:0", "language=fra",
		"-disposition:a:0", "default", "-disposition:a:1", "comment")
	path := filepath.Join(dir, name)
	run(t, "ffmpeg", append(append(append(args, tail...), more...), path)...)
	return path
}

// stream is a stream as ffprobe sees it.
type stream struct {
	Index       int
	Type        string `json:"codec_type"`
	Codec       string `json:"codec_name"`
	Layout      string `json:"channel_layout"`
	Start       string `json:"start_time"`
	Disposition map[string]int
	Tags        map[string]string
}

// streams returns all streams of a film and, by ffprobe too, a line for each packet of each: times, flags, and the hash
// of the data.
func streams(t testing.TB, path string) (list []stream, packets map[int]string) {
	t.Helper()
	var answer struct{ Streams []stream }
	if err := json.Unmarshal(run(t, "ffprobe", "-v", "error", "-show_streams", "-of", "json", path), &answer); err != nil {
		t.Fatal(err)
	}
	packets = map[int]string{}
	out := run(t, "ffprobe", "-v", "error", "-show_packets", "-show_data_hash", "sha256", "-show_entries", "packet=stream_index,pts_time,dts_time,flags,data_hash", "-of", "csv=p=0", path)
	for line := range strings.Lines(string(out)) {
		var index int
		if n, _ := fmt.Sscanf(line, "%d,", &index); n == 1 {
			packets[index] += line[strings.Index(line, ","):]
		}
	}
	return answer.Streams, packets
}

// deliver levels nothing: it writes the sound of a film's track, as it is, as its film's delivery.
func deliver(t testing.TB, source string, w Wish) (path string, spec Spec, snd audio.Block) {
	t.Helper()
	box := withFFmpeg(t)
	snd, info := decode(t, box, source)
	spec = box.SpecFor(info, w)
	spec.TagsFrom = source
	path = filepath.Join(t.TempDir(), "delivered"+spec.ExtensionFor(source))
	write(t, box, path, spec, snd)
	return path, spec, snd
}

// Everything but the levelled track is in the copy packet for packet, at the same times.
func TestFilmIsCopiedAroundItsSound(t *testing.T) {
	for name, more := range map[string][]string{
		"ac3.mkv":    {"-c:a", "ac3", "-ac:a:0", "6", "-b:a:0", "384k"},
		"aac.mkv":    {"-c:a", "aac"},
		"opus.mkv":   {"-c:a", "libopus"},
		"flac.mkv":   {"-c:a", "flac"},
		"vorbis.mkv": {"-c:a", "libvorbis"},
		"mp3.mkv":    {"-c:a", "libmp3lame"},
		"pcm.mkv":    {"-c:a", "pcm_s24le"},
		"aac.mp4":    {"-c:a", "aac"},
		"ac3.mp4":    {"-c:a", "ac3"},
		"eac3.m4v":   {"-c:a", "eac3", "-f", "mp4"},
		"pcm.mov":    {"-c:a", "pcm_s24le"},
		"aac.mov":    {"-c:a", "aac"},
		"opus.webm":  {"-c:a", "libopus"},
	} {
		for _, w := range []Wish{{Title: LevelledTitle("film")}, {Title: LevelledTitle("film"), InPlace: true}} {
			if placed := []string{"aac.mkv", "opus.mkv", "ac3.mp4", "pcm.mov", "opus.webm"}; w.InPlace != slices.Contains(placed, name) && name != "aac.mp4" {
				continue // each film is delivered one way, and one both
			}
			t.Run(fmt.Sprint(name, " in place ", w.InPlace), func(t *testing.T) {
				t.Parallel()
				source := makeFilm(t, name, more...)
				path, spec, _ := deliver(t, source, w)
				if filepath.Ext(path) != filepath.Ext(name) || spec.Note != "" {
					t.Errorf("%+v", spec)
				}
				before, packets := streams(t, source)
				after, copied := streams(t, path)
				var ours stream
				sounds := 0
				at := 0
				for _, s := range after {
					if s.Type == "audio" {
						if sounds++; sounds == spec.Film.Delivered() {
							ours = s
							if w.InPlace {
								at++
							}
							continue
						}
					}
					if at == len(before) {
						t.Fatalf("too many tracks: %+v", s)
					}
					b := before[at]
					if b.Type == "data" { // chapters
						at++
						continue
					}
					if copied[s.Index] != packets[b.Index] {
						t.Errorf("%s track %d was not copied:\n%.400s\nwas\n%.400s", s.Type, s.Index, copied[s.Index], packets[b.Index])
					}
					if fmt.Sprint(s.Disposition) != fmt.Sprint(b.Disposition) {
						t.Errorf("%s track %d: disposition %v was %v", s.Type, s.Index, s.Disposition, b.Disposition)
					}
					for _, tag := range []string{"language", "title", "handler_name", "filename", "mimetype"} {
						if s.Tags[tag] != b.Tags[tag] {
							t.Errorf("%s track %d: %s %q was %q", s.Type, s.Index, tag, s.Tags[tag], b.Tags[tag])
						}
					}
					at++
				}
				main := before[1]
				if w.InPlace {
					if ours.Tags["language"] != main.Tags["language"] || ours.Tags["title"] != main.Tags["title"] || ours.Disposition["default"] != 1 {
						t.Errorf("in place: %+v", ours)
					}
				} else if title := ours.Tags["title"] + ours.Tags["handler_name"]; !strings.Contains(title, "Levelled (film)") || ours.Tags["language"] != main.Tags["language"] || ours.Disposition["default"] != 0 {
					t.Errorf("added: %+v", ours)
				}
				if ours.Codec != main.Codec || ours.Layout != main.Layout {
					t.Errorf("%s %s became %s %s", main.Codec, main.Layout, ours.Codec, ours.Layout)
				}
				if filepath.Ext(name) == ".mkv" {
					font := filepath.Join(t.TempDir(), "font")
					run(t, "ffmpeg", "-v", "error", "-dump_attachment:t:0", font, "-i", path, "-t", "0", "-f", "null", "-")
					if string(load(t, font)) != "not really a font" {
						t.Errorf("the font came out as %q", load(t, font))
					}
				}
				if got, want := chaptersOf(t, path), chaptersOf(t, source); !bytes.Equal(got, want) {
					t.Errorf("chapters %s were %s", got, want)
				}
				if _, tags := ffprobe(t, path); tags["title"] != "Two rivers" {
					t.Errorf("tags %v", tags)
				}
			})
		}
	}
}

func chaptersOf(t testing.TB, path string) []byte {
	return run(t, "ffprobe", "-v", "error", "-show_chapters", "-show_entries", "chapter=start_time,end_time:chapter_tags", "-of", "csv", path)
}

// Containers that films are not written in become Matroska: the same pictures and sound, as far apart as they were.
func TestOtherFilmsBecomeMatroska(t *testing.T) {
	t.Parallel()
	dir := t.TempDir()
	for name, args := range map[string][]string{
		"a.avi": {"-c:v", "mpeg4", "-bf", "0", "-c:a", "libmp3lame"},
		"b.avi": {"-c:v", "mpeg4", "-bf", "2", "-c:a", "ac3"},
		"a.ts":  {"-c:v", "libx264", "-preset", "ultrafast", "-bf", "2", "-c:a", "mp2"},
		"a.mpg": {"-c:v", "mpeg2video", "-bf", "2", "-c:a", "mp2"},
		"a.flv": {"-c:v", "flv1", "-c:a", "libmp3lame"},
		"a.wmv": {"-c:v", "wmv2", "-c:a", "wmav2"},
	} {
		t.Run(name, func(t *testing.T) {
			source := filepath.Join(dir, name)
			run(t, "ffmpeg", append(append([]string{"-v", "error", "-f", "lavfi", "-i", "testsrc2=s=160x120:r=25:d=6", "-f", "lavfi", "-i", "anoisesrc=d=6:r=44100:a=0.2:c=pink:seed=1", "-ac", "2"}, args...), source)...)
			path, spec, _ := deliver(t, source, Wish{Title: LevelledTitle("film")})
			if spec.Container != "matroska" || filepath.Ext(path) != ".mkv" {
				t.Errorf("%+v", spec)
			}
			before, _ := streams(t, source)
			after, _ := streams(t, path)
			if len(after) != len(before)+1 {
				t.Fatalf("%d tracks became %d", len(before), len(after))
			}
			for n, kind := range []string{"v", "a"} {
				pictures := func(path string) string {
					return string(run(t, "ffmpeg", "-v", "error", "-i", path, "-map", "0:"+kind+":0", "-f", "streamhash", "-"))
				}
				if a, b := pictures(source), pictures(path); a != b {
					t.Errorf("decoded stream %d: %s was %s", n, b, a)
				}
			}
			if got := tracksApart(t, path, 0, path, 1); got[2] != 0 || got[3] != 0 || got[4] != 0 || got[0] < -48 || got[0] > 48 {
				t.Errorf("begins %d frames late, lags %v", got[0], got[2:])
			}
		})
	}
}

// What a levelled track takes over from the one in whose place it is says nothing about the level or the packets that
// are gone; that of other tracks stays. An index in front stays in front.
func TestStaleTagsOfAFilm(t *testing.T) {
	t.Parallel()
	stale := []string{}
	for _, tag := range []string{"REPLAYGAIN_TRACK_GAIN=-3.00 dB", "BPS=384000", "BPS-eng=384000", "NUMBER_OF_FRAMES=7", "NUMBER_OF_BYTES-eng=9", "_STATISTICS_TAGS=BPS", "COMPOSER=Nobody"} {
		stale = append(stale, "-metadata:s:a:0", tag, "-metadata:s:a:1", tag)
	}
	path, _, _ := deliver(t, makeFilm(t, "a.mkv", append([]string{"-c:a", "aac"}, stale...)...), Wish{InPlace: true})
	list, _ := streams(t, path)
	for name, value := range list[1].Tags {
		upper := strings.ToUpper(name)
		if strings.HasPrefix(upper, "REPLAYGAIN") || strings.HasPrefix(upper, "BPS") || strings.HasPrefix(upper, "NUMBER") || strings.HasPrefix(upper, "_STAT") {
			t.Errorf("%s=%s was kept", name, value)
		}
	}
	if list[1].Tags["COMPOSER"] != "Nobody" || list[2].Tags["REPLAYGAIN_TRACK_GAIN"] != "-3.00 dB" || list[2].Tags["BPS-eng"] != "384000" {
		t.Errorf("tags of the sound tracks: %v, %v", list[1].Tags, list[2].Tags)
	}
	for _, flags := range []string{"+faststart", "+empty_moov+frag_keyframe", "+use_metadata_tags"} {
		source := makeFilm(t, "a.mp4", "-map", "-5", "-c:a", "aac", "-movflags", flags) // no cover: FFmpeg breaks it in fragments
		path, _, _ := deliver(t, source, Wish{})
		in, out := load(t, source), load(t, path)
		if first := bytes.Index(in, []byte("moov")) < bytes.Index(in, []byte("mdat")); first != (bytes.Index(out, []byte("moov")) < bytes.Index(out, []byte("mdat"))) {
			t.Errorf("%s: the index is in front: it was %v", flags, first)
		}
	}
}

// Levelling a copy again, in which our track is, makes another in its place, and is not misled by it.
func TestFilmIsLevelledAgain(t *testing.T) {
	t.Parallel()
	for _, name := range []string{"a.mkv", "a.mp4", "a.mov"} {
		w := Wish{Title: LevelledTitle("film")}
		first, _, _ := deliver(t, makeFilm(t, name, "-c:a", "aac"), w)
		second, spec, _ := deliver(t, first, w)
		a, before := streams(t, first)
		b, after := streams(t, second)
		if len(a) != len(b) || spec.Film.Track != 1 || len(spec.Film.Without) != 1 {
			t.Fatalf("%s: %d tracks became %d: %+v", name, len(a), len(b), spec.Film)
		}
		for i := range a {
			if a[i].Type != "data" && before[i] != after[i] { // the levelled track too: equal sound makes equal packets
				t.Errorf("%s: track %d came out otherwise:\n%.300s\n%.300s", name, i, before[i], after[i])
			}
		}
	}
}
