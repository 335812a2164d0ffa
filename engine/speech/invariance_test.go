package speech

import (
	"encoding/binary"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"slices"
	"testing"

	"evenshelf/engine/audio"
)

// medley is speech, music, a pause, speech over music, and a pause with noise: half a minute at testRate.
func medley(t testing.TB) []float32 {
	r := heldOut(t)
	talk := scaled(r.speech["reading"], -23)[:10*testRate]
	music := scaled(r.music["machine wars"][60*testRate:80*testRate], -23)
	return slices.Concat(talk, music[:10*testRate], make([]float32, 2*testRate),
		over(talk, gain(music[10*testRate:], -12)), hiss(2, -65), talk[:2*testRate])
}

// apart is how far two courses lie apart: the most in likelihood, the mean in likelihood, and in how many steps they
// do not agree that programme is active.
func apart(a, b Course) (most, mean float64, steps int) {
	for i := range a.Active {
		d := math.Abs(float64(a.Speech[i] - b.Speech[i]))
		if a.Active[i] != b.Active[i] {
			steps++
			continue
		}
		most, mean = max(most, d), mean+d/float64(len(a.Active))
	}
	return most, mean, steps
}

// However the sound is cut into blocks, the course is the same, bit for bit.
func TestBlocksDoNotMatter(t *testing.T) {
	x := medley(t)
	stereo := audio.Block{x, gain(x, -3)}
	want := courseOf(testRate, audio.Stereo, stereo)
	r := rand.New(rand.NewPCG(1, 1))
	for _, most := range []int{1, 7, 1000, 50000} {
		d := New(audio.Format{Rate: testRate, Layout: audio.Stereo})
		view := make(audio.Block, 2)
		for at := 0; at < len(x); {
			n := min(len(x)-at, 1+r.IntN(most))
			d.Write(stereo.Cut(view, at, at+n))
			at += n
		}
		got := d.Finish()
		if !slices.Equal(got.Active, want.Active) || !slices.Equal(got.Speech, want.Speech) {
			t.Errorf("blocks of up to %d frames change the course", most)
		}
	}
}

// How loud a recording is does not matter, as long as its soft parts stay over −70 dBFS.
func TestGainDoesNotMatter(t *testing.T) {
	x := medley(t)
	want := course(x)
	for _, decibels := range []float64{-30, -12.3, 10} {
		most, _, steps := apart(course(gain(x, decibels)), want)
		t.Logf("%+g dB: likelihoods differ by %.4f at most, activity in %d steps of %d", decibels, most, steps, len(want.Active))
		if most > 0.02 || steps > 4 {
			t.Errorf("%+g dB: want at most 0.02 and 4 steps", decibels)
		}
	}
}

// The same sound at another sampling rate has nearly the same course; FFmpeg resamples.
func TestRatesAgree(t *testing.T) {
	path := wavOf(t, medley(t))
	var want Course
	for _, rate := range []int{44100, 8000, 11025, 16000, 22050, 32000, 48000, 88200, 96000, 192000, 384000} {
		x, err := decode(rate, "-f", "f32le", "-ar", fmt.Sprint(testRate), "-ac", "1", "-i", path)
		if err != nil {
			t.Fatal(err)
		}
		got := courseOf(rate, audio.Mono, audio.Block{x})
		if rate == 44100 {
			want = got
			continue
		}
		for i := range max(len(want.Active), len(got.Active)) - min(len(want.Active), len(got.Active)) {
			got.Active, got.Speech = append(got.Active, i < 0), append(got.Speech, 0)
		}
		other := 0
		for i, v := range got.Speech[:len(want.Speech)] {
			if (v >= 0.5) != (want.Speech[i] >= 0.5) {
				other++
			}
		}
		most, mean, steps := apart(want, got)
		t.Logf("%6d Hz: likelihoods differ by %.3f at most, %.4f on average, decisions in %d and activity in %d of %d steps",
			rate, most, mean, other, steps, len(want.Active))
		if mean > 0.02 || other > 6 || steps > 4 {
			t.Errorf("%d Hz: want at most 0.02 on average, 6 and 4 steps", rate)
		}
	}
}

// wavOf keeps sound in a file, 32-bit floats without a header.
func wavOf(t *testing.T, x []float32) string {
	t.Helper()
	path := t.TempDir() + "/sound.f32"
	var raw []byte
	for _, v := range x {
		raw = binary.LittleEndian.AppendUint32(raw, math.Float32bits(v))
	}
	if err := os.WriteFile(path, raw, 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

// Two channels of the same sound, one alone, opposite polarity, and a centre among other channels: all are judged like
// one channel.
func TestChannelsAgree(t *testing.T) {
	x := medley(t)
	none := make([]float32, len(x))
	want := course(x)
	music := gain(heldOut(t).music["frontiers"][:len(x)], -20)
	for _, test := range []struct {
		name   string
		layout audio.Layout
		sound  audio.Block
		most   float64
	}{
		{"both", audio.Stereo, audio.Block{x, x}, 1e-3},
		{"left", audio.Stereo, audio.Block{x, none}, 1e-3},
		{"right", audio.Stereo, audio.Block{none, x}, 0.01},
		{"opposite", audio.Stereo, audio.Block{x, gain(x, 0)}, 0.01},
		{"centre of six", audio.UsualLayout(6), audio.Block{none, none, x, none, none, none}, 1e-3},
		{"centre of six under music", audio.UsualLayout(6), audio.Block{music, music, x, none, music, music}, 1},
		{"one of twelve", audio.UsualLayout(12), audio.Block{none, none, none, none, none, none, none, x, none, none, none, none}, 0.01},
	} {
		if test.name == "opposite" {
			for i, v := range x {
				test.sound[1][i] = -v
			}
		}
		got := courseOf(testRate, test.layout, test.sound)
		most, mean, steps := apart(got, want)
		t.Logf("%-26s %.4f at most, %.4f on average, activity in %d steps", test.name, most, mean, steps)
		if most > test.most || mean > 0.15 || test.most < 1 && steps > 4 {
			t.Errorf("%s: likelihoods differ by %.4f, activity in %d steps; want %.4f and 4", test.name, most, steps, test.most)
		}
	}
}

// What is no number counts as silence, and leaves the other channel alone.
func TestNotFiniteIsSilence(t *testing.T) {
	x := medley(t)
	holes, torn := slices.Clone(x), slices.Clone(x)
	for i := 1000; i < len(x); i += 9973 {
		for k := range 40 {
			holes[i+k%(len(x)-i)] = 0
			torn[i+k%(len(x)-i)] = []float32{float32(math.NaN()), float32(math.Inf(1)), float32(math.Inf(-1))}[k%3]
		}
	}
	want := courseOf(testRate, audio.Stereo, audio.Block{holes, x})
	got := courseOf(testRate, audio.Stereo, audio.Block{torn, x})
	if !slices.Equal(got.Active, want.Active) || !slices.Equal(got.Speech, want.Speech) {
		t.Error("samples that are not finite do not count as silence")
	}
}
