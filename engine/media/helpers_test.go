package media

import (
	"bytes"
	"context"
	"encoding/binary"
	"encoding/json"
	"errors"
	"io"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"sync"
	"testing"

	"evenshelf/engine/audio"
)

// run runs an outside program and returns its output. The programs are Debian packages of general use;
// without them nothing here could be checked by a second opinion.
func run(t testing.TB, name string, args ...string) []byte {
	t.Helper()
	path, err := exec.LookPath(name)
	if err != nil {
		t.Fatalf("this test needs %s: apt install ffmpeg flac sox lame", name)
	}
	cmd := exec.Command(path, args...)
	var stderr bytes.Buffer
	cmd.Stderr = &stderr
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("%s %v: %v\n%s", name, args, err, &stderr)
	}
	return out
}

var found = sync.OnceValue(Find) // asks FFmpeg for its version once

// withFFmpeg returns a toolbox that has FFmpeg, withoutFFmpeg one that has not.
func withFFmpeg(t testing.TB) *Toolbox {
	t.Helper()
	box := found()
	if box.FFmpeg() == "" {
		t.Fatal("this test needs FFmpeg: apt install ffmpeg")
	}
	return box
}

func withoutFFmpeg() *Toolbox { return New("") }

// save writes a file into the test's folder and returns its path.
func save(t testing.TB, name string, data []byte) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, data, 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

func load(t testing.TB, path string) []byte {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

func open(t testing.TB, box *Toolbox, path string) Reader {
	t.Helper()
	r, err := box.Open(context.Background(), path)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { r.Close() })
	return r
}

// drain reads a source to its end in blocks of so many frames. The error is nil at io.EOF.
func drain(src audio.Source, block int) (audio.Block, error) {
	channels := src.Format().Layout.Channels
	all, buf := make(audio.Block, channels), audio.NewBlock(channels, block)
	for {
		n, err := src.ReadBlock(buf)
		for c := range all {
			all[c] = append(all[c], buf[c][:n]...)
		}
		if err == io.EOF {
			return all, nil
		} else if err != nil {
			return all, err
		}
	}
}

// decode opens and reads a whole file that must be in order.
func decode(t testing.TB, box *Toolbox, path string) (audio.Block, Info) {
	t.Helper()
	return drained(t, open(t, box, path))
}

// drained reads a whole recording that must be in order.
func drained(t testing.TB, r Reader) (audio.Block, Info) {
	t.Helper()
	all, err := drain(r, audio.BlockFrames)
	if err != nil {
		t.Fatal(err)
	}
	if d, ok := r.(Damaged); ok && d.Damage() != "" {
		t.Fatalf("unexpected damage: %s", d.Damage())
	}
	return all, r.Info()
}

// byFFmpeg opens a recording with FFmpeg whether it is long enough to be worth it or not.
func byFFmpeg(t testing.TB, path string) Reader {
	t.Helper()
	f, size, err := openRegular(path)
	if err != nil {
		t.Fatal(err)
	}
	k, err := recognise(f, size)
	if err != nil {
		t.Fatal(err)
	}
	r, err := withFFmpeg(t).openFFmpeg(context.Background(), f, path, k, 0)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { r.Close() })
	return r
}

// flacDecoders are the ways to read a short FLAC.
func flacDecoders(t testing.TB) map[string]func(path string) Reader {
	return map[string]func(string) Reader{
		"ffmpeg": func(path string) Reader { return byFFmpeg(t, path) },
		"mewkiz": func(path string) Reader { return open(t, withoutFFmpeg(), path) },
	}
}

// write makes a file of a block, in ragged pieces.
func write(t testing.TB, box *Toolbox, path string, spec Spec, all audio.Block) {
	t.Helper()
	if err := tryWrite(context.Background(), box, path, spec, all); err != nil {
		t.Fatal(err)
	}
}

func tryWrite(ctx context.Context, box *Toolbox, path string, spec Spec, all audio.Block) error {
	w, err := box.Create(ctx, path, spec)
	if err != nil {
		return err
	}
	view, rng := make(audio.Block, len(all)), rand.New(rand.NewPCG(1, 2))
	for i := 0; i < all.Frames(); {
		n := min(1+rng.IntN(6000), all.Frames()-i)
		if err := w.WriteBlock(all.Cut(view, i, i+n)); err != nil {
			return errors.Join(err, w.Close())
		}
		i += n
	}
	return w.Close()
}

// programme is a test signal: a few tones and some noise, different in every channel, as float32 on the
// grid of so many bits.
func programme(channels, frames, bits int, peak float64) audio.Block {
	b, rng := audio.NewBlock(channels, frames), rand.New(rand.NewPCG(3, 4))
	full := math.Ldexp(1, bits-1)
	for c := range b {
		for i := range b[c] {
			x := 0.5*math.Sin(float64(i)*0.0313*(1+float64(c)/7)) + 0.3*math.Sin(float64(i)*0.211+float64(c)) + 0.2*(2*rng.Float64()-1)
			b[c][i] = float32(math.Round(x*peak*(full-1))/full) + 0 // no −0: integers have none
		}
	}
	return b
}

// interleaved returns a block as raw little-endian integers of so many bits, as outside programs do.
func interleaved(b audio.Block, bits int) []byte {
	out := make([]byte, 0, len(b)*b.Frames()*bits/8)
	for i := range b.Frames() {
		for c := range b {
			v := int64(math.Round(float64(b[c][i]) * math.Ldexp(1, bits-1)))
			out = append(out, binary.LittleEndian.AppendUint64(nil, uint64(v))[:bits/8]...)
		}
	}
	return out
}

// rawInts returns the sound of a file as FFmpeg's own command decodes it, in 32-bit integers.
func rawInts(t testing.TB, path string) []byte {
	t.Helper()
	return run(t, "ffmpeg", "-v", "error", "-i", path, "-map", "0:a:0", "-f", "s32le", "-")
}

// ffprobe returns what ffprobe says about the first sound stream, and the file's tags.
func ffprobe(t testing.TB, path string) (stream map[string]any, tags map[string]string) {
	t.Helper()
	var answer struct {
		Streams []map[string]any
		Format  struct{ Tags map[string]string }
	}
	if err := json.Unmarshal(run(t, "ffprobe", "-v", "error", "-of", "json", "-show_streams", "-show_format", path), &answer); err != nil {
		t.Fatal(err)
	}
	for _, s := range answer.Streams {
		if s["codec_type"] == "audio" && stream == nil {
			stream = s
		}
	}
	return stream, answer.Format.Tags
}

// sameSound fails unless two blocks are equal to the last bit.
func sameSound(t testing.TB, got, want audio.Block) {
	t.Helper()
	if len(got) != len(want) || got.Frames() != want.Frames() {
		t.Fatalf("%d channels × %d frames, want %d × %d", len(got), got.Frames(), len(want), want.Frames())
	}
	for c := range want {
		for i := range want[c] {
			if math.Float32bits(got[c][i]) != math.Float32bits(want[c][i]) {
				t.Fatalf("channel %d frame %d is %v, want %v", c, i, got[c][i], want[c][i])
			}
		}
	}
}

// apart returns the RMS of the difference of two blocks re the RMS of the first, in dB.
func apart(a, b audio.Block) float64 {
	var diff, power float64
	for c := range a {
		for i := range a[c] {
			d := float64(a[c][i]) - float64(b[c][i])
			diff += d * d
			power += float64(a[c][i]) * float64(a[c][i])
		}
	}
	return 10 * math.Log10(diff/power)
}

func peakRMS(b audio.Block) (peak, rms float64) {
	n := 0
	for c := range b {
		for _, x := range b[c] {
			peak = max(peak, math.Abs(float64(x)))
			rms += float64(x) * float64(x)
			n++
		}
	}
	return audio.ToDB(peak), audio.ToDB(math.Sqrt(rms / float64(n)))
}

func stereo(rate int) audio.Format { return audio.Format{Rate: rate, Layout: audio.Stereo} }

// saveAs writes a file over whatever is there and returns its path.
func saveAs(t testing.TB, path string, data []byte) string {
	t.Helper()
	if err := os.WriteFile(path, data, 0o644); err != nil {
		t.Fatal(err)
	}
	return path
}

// lag returns by how many frames got is behind want: where their cross-correlation peaks, over the middle of want.
func lag(want, got []float32) int {
	const reach, enough = 1300, 3000
	from := max(0, (len(want)-enough)/2)
	best, at := -1.0, reach+1
	for k := -reach; k <= reach; k++ {
		sum := 0.0
		for i := max(from, -k); i < min(from+enough, len(want), len(got)-k); i++ {
			sum += float64(want[i]) * float64(got[i+k])
		}
		if sum > best {
			best, at = sum, k
		}
	}
	return at
}
