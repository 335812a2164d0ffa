package demo

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"io/fs"
	"math"
	"os"
	"os/exec"
	"path"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"unicode"
	"unicode/utf8"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
)

// toolbox returns the tools of this machine; FFmpeg must be among them.
func toolbox(t *testing.T) *media.Toolbox {
	t.Helper()
	tools := media.Find()
	if tools.FFmpeg() == "" {
		t.Fatal("this test needs ffmpeg and ffprobe on PATH; `make test` installs them")
	}
	return tools
}

// sound decodes a file of the shelf.
func sound(t *testing.T, tools *media.Toolbox, name string) (media.Info, audio.Block) {
	t.Helper()
	r, err := tools.Open(t.Context(), name)
	if err != nil {
		t.Fatal(err)
	}
	defer r.Close()
	b := make(audio.Block, r.Info().Format.Layout.Channels)
	if _, err := audio.Each(r, func(part audio.Block) error {
		for c := range b {
			b[c] = append(b[c], part[c]...)
		}
		return nil
	}); err != nil {
		t.Fatal(err)
	}
	return r.Info(), b
}

// flatTop returns the longest run of equal 16-bit samples within 1 % of the highest, the mark of clipping
// (runs of 3 to 7 are the usual thresholds; common practice).
func flatTop(b audio.Block) int {
	var peak float32
	for _, ch := range b {
		for _, x := range ch {
			peak = max(peak, x, -x)
		}
	}
	longest := 0
	for _, ch := range b {
		run, last := 0, 0
		for _, x := range ch {
			v := int(math.Round(float64(x) * 32768))
			switch {
			case max(x, -x) < 0.99*peak || v == 0:
				run = 0
			case v == last:
				run++
			default:
				run = 1
			}
			last = v
			longest = max(longest, run)
		}
	}
	return longest
}

func TestShelfPaths(t *testing.T) {
	items := Shelf()
	damaged, seen := 0, map[string]bool{}
	for _, it := range items {
		if !fs.ValidPath(it.Path) || !utf8.ValidString(it.Path) || strings.ContainsFunc(it.Path, unicode.IsControl) || strings.ContainsAny(it.Path, `\:*?"<>|`) {
			t.Errorf("%q is not a path for every file system", it.Path)
		}
		if n := len(path.Base(it.Path)); n > 255 {
			t.Errorf("%q: a name of %d bytes", it.Path, n)
		}
		if !media.LooksLikeMedia(it.Path) {
			t.Errorf("%q does not look like a recording: a folder scan would miss it", it.Path)
		}
		if key := strings.ToLower(it.Path); seen[key] {
			t.Errorf("%q is there twice", it.Path)
		} else {
			seen[key] = true
		}
		if !strings.HasSuffix(it.About, ".") {
			t.Errorf("%q: About %q is not a sentence", it.Path, it.About)
		}
		if it.Damaged {
			damaged++
		}
	}
	if len(items) < 28 || damaged < 5 {
		t.Errorf("%d items, %d of them damaged; want at least 28 and 5", len(items), damaged)
	}
}

// TestShelfIsVaried counts what a shelf must have for a trial to meet every kind of file.
func TestShelfIsVaried(t *testing.T) {
	rates, depths, channels, codecs := map[int]int{}, map[int]int{}, map[int]int{}, map[string]int{}
	for _, it := range Shelf() {
		if !it.Damaged {
			rates[it.Spec.Format.Rate]++
			depths[it.Spec.BitDepth]++
			channels[it.Spec.Format.Layout.Channels]++
			codecs[it.Spec.Codec]++
		}
	}
	for _, rate := range []int{22050, 32000, 44100, 48000, 96000} {
		if rates[rate] == 0 {
			t.Errorf("nothing at %d Hz", rate)
		}
	}
	for _, codec := range []string{"pcm_s16le", "pcm_s24le", "pcm_f32le", "flac", "mp3", "vorbis"} {
		if codecs[codec] == 0 {
			t.Errorf("nothing in %s", codec)
		}
	}
	if channels[1] == 0 || channels[2] == 0 || channels[6] == 0 {
		t.Errorf("channel counts %v, want 1, 2 and 6", channels)
	}
}

// pick returns the items at the given paths.
func pick(t *testing.T, paths ...string) []Item {
	t.Helper()
	var out []Item
	for _, p := range paths {
		i := slices.IndexFunc(Shelf(), func(it Item) bool { return it.Path == p })
		if i < 0 {
			t.Fatalf("no item %q", p)
		}
		out = append(out, Shelf()[i])
	}
	return out
}

func TestWriteIsDeterministic(t *testing.T) {
	tools := toolbox(t)
	items := pick(t, "jingles/half-past.wav", "jingles/weather.wav", "talk/whispered-from-the-hide.wav",
		"talk/مرسونا ولالبير.flac", "talk/allotment-hour.mp3", "music/kerb-and-gutter.ogg", "damaged/scratched.flac")
	var sums [2][]string
	for round := range sums {
		dir := t.TempDir()
		var steps []int
		got, err := write(t.Context(), tools, dir, items, func(done, total int) {
			if total != len(items) {
				t.Errorf("progress says %d items, want %d", total, len(items))
			}
			steps = append(steps, done)
		})
		if err != nil {
			t.Fatal(err)
		}
		if !slices.Equal(steps, []int{1, 2, 3, 4, 5, 6, 7}) {
			t.Errorf("progress went %v", steps)
		}
		for _, it := range got {
			b, err := os.ReadFile(filepath.Join(dir, filepath.FromSlash(it.Path)))
			if err != nil {
				t.Fatal(err)
			}
			sum := sha256.Sum256(b)
			sums[round] = append(sums[round], string(sum[:]))
		}
	}
	for i, it := range items {
		if sums[0][i] != sums[1][i] {
			t.Errorf("%s: other bytes the second time", it.Path)
		}
	}
}

func TestWriteWithoutFFmpeg(t *testing.T) {
	dir := t.TempDir()
	items, err := write(t.Context(), media.New(""), dir, pick(t, "talk/allotment-hour.mp3", "damaged/letter-to-the-station.mp3"), nil)
	if err != nil {
		t.Fatal(err)
	}
	if items[0].Path != "talk/allotment-hour.flac" || items[1].Path != "damaged/letter-to-the-station.mp3" {
		t.Errorf("written as %s and %s", items[0].Path, items[1].Path)
	}
	info, b := sound(t, media.New(""), filepath.Join(dir, "talk", "allotment-hour.flac"))
	if info.Codec != "flac" || info.Format.Seconds(int64(b.Frames())) < 20 {
		t.Errorf("%s of %d frames", info.Codec, b.Frames())
	}
}

func TestWriteKeepsWhatIsThere(t *testing.T) {
	dir := t.TempDir()
	mine := filepath.Join(dir, "jingles", "half-past.wav")
	if err := os.MkdirAll(filepath.Dir(mine), 0o755); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(mine, []byte("mine"), 0o644); err != nil {
		t.Fatal(err)
	}
	_, err := write(t.Context(), toolbox(t), dir, pick(t, "jingles/half-past.wav"), nil)
	if !errors.Is(err, fs.ErrExist) || !strings.Contains(err.Error(), mine) {
		t.Errorf("error %v, want one that names the file and says it exists", err)
	}
	if b, err := os.ReadFile(mine); err != nil || string(b) != "mine" {
		t.Errorf("the file is now %q (%v)", b, err)
	}
}

func TestWriteStops(t *testing.T) {
	enough := errors.New("enough")
	ctx, cancel := context.WithCancelCause(t.Context())
	items := slices.Concat(pick(t, "jingles/half-past.wav"), damaged())
	if _, err := write(ctx, toolbox(t), t.TempDir(), items, func(int, int) { cancel(enough) }); !errors.Is(err, enough) {
		t.Errorf("stopped on the way: error %v, want the cause", err)
	}
	dir := t.TempDir()
	if _, err := Write(ctx, toolbox(t), dir, nil); !errors.Is(err, enough) {
		t.Errorf("stopped before: error %v, want the cause", err)
	}
	if left, err := os.ReadDir(dir); err != nil || len(left) != 0 {
		t.Errorf("stopped before: left %v (%v)", left, err)
	}
}

// TestDamage looks at every damaged item for its own damage, with FFmpeg's decoder as the outside judge of
// those that should not decode.
func TestDamage(t *testing.T) {
	tools := toolbox(t)
	dir := t.TempDir()
	items, err := write(t.Context(), tools, dir, damaged(), nil)
	if err != nil {
		t.Fatal(err)
	}
	for _, it := range items {
		name := filepath.Join(dir, filepath.FromSlash(it.Path))
		file, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		switch strings.TrimPrefix(it.Path, "damaged/") {
		case "nothing-at-all.wav":
			if len(file) != 0 {
				t.Errorf("%s: %d bytes", it.Path, len(file))
			}
		case "letter-to-the-station.mp3", "saturday-programme.mp3":
			if !utf8.Valid(file) || bytes.ContainsFunc(file, func(r rune) bool { return unicode.IsControl(r) && r != '\n' }) {
				t.Errorf("%s: not a text", it.Path)
			}
		case "cut-short.wav":
			data := bytes.Index(file, []byte("data")) + 8
			if promised := int(binary.LittleEndian.Uint32(file[data-4:])); promised < 2*(len(file)-data) {
				t.Errorf("%s: promises %d bytes of sound and has %d", it.Path, promised, len(file)-data)
			}
		case "absurd-header.wav", "no-channels.wav", "scratched.flac":
			out, _ := exec.CommandContext(t.Context(), tools.FFmpeg(), "-nostdin", "-v", "error", "-i", name, "-f", "null", "-").CombinedOutput()
			if len(out) == 0 {
				t.Errorf("%s: FFmpeg has no complaint", it.Path)
			}
		case "overdriven.wav":
			_, b := sound(t, tools, name)
			flat := 0
			for _, x := range b[0] {
				if math.Abs(float64(x)) > 0.999 {
					flat++
				}
			}
			if share := float64(flat) / float64(b.Frames()); share < 0.02 || flatTop(b) < 10 {
				t.Errorf("%s: %.1f %% at full scale, longest flat top %d samples", it.Path, 100*share, flatTop(b))
			}
		case "silent.wav":
			_, b := sound(t, tools, name)
			if slices.ContainsFunc(b[0], func(x float32) bool { return x != 0 }) || b.Frames() == 0 {
				t.Errorf("%s: not digital silence", it.Path)
			}
		default:
			t.Errorf("%s: how is it damaged?", it.Path)
		}
	}
}

// BenchmarkBuild renders and masters one item of each kind.
func BenchmarkBuild(b *testing.B) {
	for _, it := range Shelf() {
		switch it.Path {
		case "talk/morning-desk.flac", "music/kerb-and-gutter.ogg", "concert/seven-quiet-rooms.flac", "tape/reel-11-ferryman.flac":
		default:
			continue
		}
		b.Run(path.Base(it.Path), func(b *testing.B) {
			b.ReportAllocs()
			var seconds float64
			for b.Loop() {
				seconds += it.Spec.Format.Seconds(int64(it.Build().Frames()))
			}
			b.ReportMetric(seconds/b.Elapsed().Seconds(), "x-realtime")
		})
	}
}
