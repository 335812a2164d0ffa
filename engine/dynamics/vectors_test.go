package dynamics

import (
	_ "embed"
	"encoding/json"
	"math"
	"testing"

	"evenshelf/engine/audio"
)

//go:embed testdata/vectors.json
var vectorsJSON []byte

// vectors are what numpy and scipy make of the same formulas: see testdata/vectors.py.
var vectors = func() (v struct {
	GainComputer []struct {
		Compression
		Level []float64 `json:"level_db"`
		Gain  []float64 `json:"gain_db"`
	} `json:"gain_computer"`
	SlidingMaximum struct {
		Values, Maxima []int64
		Size           int
	} `json:"sliding_maximum"`
	Compressor []struct {
		Compression
		Rate, Channels, Frames, Every int
		Gain                          []float64 `json:"gain_db"`
	}
	Stage struct {
		Rate, Frames, Every int
		Limit               float64
		Look                float64 `json:"look_s"`
		Hold                float64 `json:"hold_s"`
		Release             float64 `json:"release_s"`
		Gain                []float64
	}
}) {
	if err := json.Unmarshal(vectorsJSON, &v); err != nil {
		panic(err)
	}
	return v
}()

// steppedNoise is the sound of testdata/vectors.py.
func steppedNoise(rate, channels, frames int) audio.Block {
	steps := []float64{0.02, 0.5, 0.9, 0.05, 0.3, 0.01, 0.7, 0.7}
	b := audio.NewBlock(channels, frames)
	for c, x := range b {
		s := uint32(c + 1)
		for i := range x {
			s = 1664525*s + 1013904223
			x[i] = float32((float64(s>>16)/32768 - 1) * steps[i*20/rate%len(steps)])
		}
	}
	return b
}

func TestGainComputerAgainstVectors(t *testing.T) {
	for _, curve := range vectors.GainComputer {
		for i, level := range curve.Level {
			if got := -curve.Reduction(level); math.Abs(got-curve.Gain[i]) > 1e-6 {
				t.Errorf("%+v at %g dB: %.7f dB, want %.7f", curve.Compression, level, got, curve.Gain[i])
			}
		}
	}
}

func TestSlidingMaximumAgainstVectors(t *testing.T) {
	v := vectors.SlidingMaximum
	w := newSlidingMax(v.Size)
	for i, x := range v.Values {
		if got := w.push(x); got != v.Maxima[i] {
			t.Errorf("value %d: %d, want %d", i, got, v.Maxima[i])
		}
	}
}

// The gain is read off the sound itself, where that is loud enough for float32 to tell.
func TestCompressorAgainstVectors(t *testing.T) {
	for _, v := range vectors.Compressor {
		f := audio.Format{Rate: v.Rate, Layout: audio.UsualLayout(v.Channels)}
		x := steppedNoise(v.Rate, v.Channels, v.Frames)
		out := through(NewCompressor(f, v.Compression), x, whole)
		deepest, read := 0.0, 0
		for i, want := range v.Gain {
			at := i * v.Every
			if math.Abs(float64(x[0][at])) < 0.001 {
				continue
			}
			got := audio.ToDB(float64(out[0][at]) / float64(x[0][at]))
			deepest, read = min(deepest, want), read+1
			// Two roundings to float32 are up to 1e−6 dB; the vectors have 7 decimals.
			if math.Abs(got-want) > 3e-6 {
				t.Errorf("%d Hz, frame %d: gain %.6f dB, want %.6f", v.Rate, at, got, want)
			}
		}
		if deepest > -3 || read < 20 {
			t.Errorf("%d Hz: %d gains down to %.1f dB prove little", v.Rate, read, deepest)
		}
	}
}

func TestCeilingAgainstVectors(t *testing.T) {
	v := vectors.Stage
	f := audio.Format{Rate: v.Rate, Layout: audio.Mono}
	s := newStage(f, audio.DBTP(audio.ToDB(v.Limit)), Timing{v.Look, v.Hold, v.Release}, &samplePeaks{})
	x := steppedNoise(v.Rate, 1, v.Frames)
	var got []float64
	view := make(audio.Block, 1)
	for at := 0; at < v.Frames; at += 1000 {
		got = append(got, s.process(x.Cut(view, at, min(at+1000, v.Frames))).gains...)
	}
	for b := s.line.tail(); b != nil; b = s.line.tail() {
		got = append(got, s.run(b).gains...)
	}
	for i, want := range v.Gain {
		if math.Abs(got[i*v.Every]-want) > 1e-7 { // the limit is rounded to float32
			t.Errorf("frame %d: gain %.9f, want %.9f", i*v.Every, got[i*v.Every], want)
		}
	}
}
