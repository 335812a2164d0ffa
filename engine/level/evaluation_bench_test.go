package level_test

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"sync/atomic"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/engine/media"
	"evenshelf/engine/profile"
)

// bench levels programmes in a folder of its own.
type bench struct {
	*sheet
	recordings
	engine *level.Engine
	dir    string
	files  *atomic.Int64
}

func newBench(t *testing.T) bench {
	return bench{newSheet(), real(t), &level.Engine{Media: media.Find()}, t.TempDir(), new(atomic.Int64)}
}

// path is a new one in the bench's folder.
func (b bench) path() string { return filepath.Join(b.dir, fmt.Sprint(b.files.Add(1), ".wav")) }

// written writes a programme as 32-bit float WAV.
func (b bench) written(t *testing.T, p programme) string {
	t.Helper()
	path := b.path()
	f := audio.Format{Rate: rate, Layout: audio.UsualLayout(len(p.sound))}
	sink, err := b.engine.Media.Create(context.Background(), path, media.Spec{Container: "wav", Codec: "pcm_f32le", BitDepth: 32, Float: true, Format: f})
	if err != nil {
		t.Fatal(err)
	}
	view := make(audio.Block, len(p.sound))
	for at := 0; at < p.sound.Frames(); at += audio.BlockFrames {
		if err := sink.WriteBlock(p.sound.Cut(view, at, min(at+audio.BlockFrames, p.sound.Frames()))); err != nil {
			t.Fatal(err)
		}
	}
	if err := sink.Close(); err != nil {
		t.Fatal(err)
	}
	return path
}

// read decodes a delivered file.
func (b bench) read(t *testing.T, path string) audio.Block {
	t.Helper()
	src, err := b.engine.Media.Open(context.Background(), path)
	if err != nil {
		t.Fatal(err)
	}
	defer src.Close()
	out := make(audio.Block, src.Format().Layout.Channels)
	for c := range out {
		out[c] = make([]float32, 0, max(0, src.Info().Frames))
	}
	if _, err := audio.Each(src, func(x audio.Block) error {
		for c := range out {
			out[c] = append(out[c], x[c]...)
		}
		return nil
	}); err != nil {
		t.Fatal(err)
	}
	return out
}

// run is a programme that went through a profile.
type run struct {
	level.Outcome
	programme
	profile profile.Profile
	source  string
	path    string      // of the copy
	out     audio.Block // nil if it failed
}

// on names the run.
func (r run) on() string { return r.name + " · " + r.profile.Name }

// level takes a written programme through a profile.
func (b bench) level(t *testing.T, p programme, source string, with profile.Profile) run {
	t.Helper()
	r := run{programme: p, profile: with, source: source, path: b.path()}
	var err error
	if r.Outcome, err = b.engine.Level(context.Background(), source, level.Task{Profile: with}, r.path); err != nil {
		t.Fatalf("%s: %v", r.on(), err)
	}
	if r.After == nil {
		b.line("Not delivered", "| %s | %s |", r.on(), r.Verdict.Reason)
		return r
	}
	r.out = b.read(t, r.path)
	return r
}

// done removes a run's copy.
func (r run) done() { os.Remove(r.path) }

// reachable reports whether the target could be reached: the engine says so, and without a limiter it is not the
// peaks that were in the way.
func (r run) reachable() bool {
	if r.profile.Limiter.Most == 0 && truePeak(r.out) > float64(r.profile.Ceiling)-0.25 {
		return false
	}
	return !r.Plan.Untouched && !strings.Contains(r.Verdict.Reason, "could not be reached")
}

// bare is a built-in profile of which only the ride is left: neither compressor nor limiter has anything to do.
func bare(t *testing.T, name string) profile.Profile {
	p := named(t, name)
	p.Name += ", ride alone"
	p.Compressor.Ratio = 1
	p.Target = -40
	return p
}

func named(t *testing.T, name string) profile.Profile {
	t.Helper()
	p, err := profile.Named(name)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

// gainSteps is how many values a rendered gain has a second.
const gainSteps = 100

// gain is the rendered gain in dB, every 10 ms: by least squares what the source has to be multiplied by to give
// the copy. NaN where the source is silent.
func (r run) gain() []float64 {
	const n = rate / gainSteps
	out := make([]float64, r.sound.Frames()/n)
	for k := range out {
		var xy, xx float64
		for c, x := range r.sound {
			y := r.out[c]
			for i := k * n; i < (k+1)*n; i++ {
				xy, xx = xy+float64(x[i])*float64(y[i]), xx+float64(x[i])*float64(x[i])
			}
		}
		out[k] = math.NaN()
		if xx > n*1e-10 && xy > 0 {
			out[k] = 20 * math.Log10(xy/xx)
		}
	}
	return out
}

// within are the values of a gain between two times in s that are numbers.
func within(gain []float64, from, to float64) (out []float64) {
	for i := max(0, int(math.Ceil(from*gainSteps))); i < min(len(gain), int(to*gainSteps)); i++ {
		if !math.IsNaN(gain[i]) {
			out = append(out, gain[i])
		}
	}
	return out
}

func median(x []float64) float64 { return quantile(x, 0.5) }

// most and least are of values that are numbers; 0 values give NaN.
func most(x []float64) float64  { return quantile(x, 1) }
func least(x []float64) float64 { return quantile(x, 0) }
