package speech

import (
	"math"
	"math/rand/v2"
	"testing"

	"evenshelf/engine/audio"
)

// Half a minute of what is neither speech nor music is not speech.
func TestNoisesAreNotSpeech(t *testing.T) {
	const seconds = 30
	r := rand.New(rand.NewPCG(11, 12))
	made := func(sample func(s float64) float64) []float32 {
		x := make([]float32, seconds*testRate)
		for i := range x {
			x[i] = float32(sample(float64(i) / testRate))
		}
		return x
	}
	tone := func(hz, s float64) float64 { return math.Sin(2 * math.Pi * hz * s) }
	var rows [12]float64
	for name, x := range map[string][]float32{
		"white noise": made(func(float64) float64 { return 0.1 * r.NormFloat64() }),
		"pink noise": made(func(float64) (sum float64) { // after R. Voss: rows that change ever more rarely
			for k := range rows {
				if r.IntN(1<<k) == 0 {
					rows[k] = r.NormFloat64()
				}
				sum += 0.03 * rows[k]
			}
			return sum
		}),
		"hum": made(func(s float64) float64 {
			return 0.2*tone(50, s) + 0.1*tone(100, s) + 0.05*tone(150, s) + 0.02*tone(350, s)
		}),
		"60 Hz":    made(func(s float64) float64 { return 0.1*tone(60, s) + 0.05*tone(180, s) + 0.001*r.NormFloat64() }),
		"tone":     made(func(s float64) float64 { return 0.1 * tone(997, s) }),
		"sweep":    made(func(s float64) float64 { return 0.1 * tone(50+55*s, s) }),
		"chord":    made(func(s float64) float64 { return 0.05 * (tone(220, s) + tone(277.2, s) + tone(329.6, s)) }),
		"applause": clapping(r, seconds),
	} {
		c := course(x)
		most := float32(0)
		for _, p := range c.Speech {
			most = max(most, p)
		}
		t.Logf("%-12s %.3f active, likelihood of speech %.4f at most", name, activeShare(c.Active), most)
		if most >= 0.5 || activeShare(c.Active) < 0.99 {
			t.Errorf("%s: want below 0.5, and active", name)
		}
	}
}

// clapping is a full hall: 250 claps a second, each a burst of noise that is gone in some 5 ms.
func clapping(r *rand.Rand, seconds int) []float32 {
	x := make([]float32, seconds*testRate)
	for range 250 * seconds {
		at, loud := r.IntN(len(x)-1000), 0.05+0.1*r.Float64()
		for i := range 1000 {
			x[at+i] += float32(loud * r.NormFloat64() * math.Exp(-float64(i)/110))
		}
	}
	return x
}

// Silence is a pause, and so is what a converter makes of silence: the last bit of 16, now and then, on some DC.
func TestSilenceIsAPause(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 9))
	dither := make([]float32, 10*testRate)
	for i := range dither {
		dither[i] = 0.01 + float32(r.IntN(2))/32768
	}
	for name, x := range map[string][]float32{"digital silence": make([]float32, 10*testRate), "dither and DC": dither} {
		c := course(x)
		if len(c.Active) != 100 || activeShare(c.Active) != 0 {
			t.Errorf("%s: %.3f of %d steps active", name, activeShare(c.Active), len(c.Active))
		}
	}
}

// Short recordings have as many steps as they fill or begin, and those of a second or more are judged.
func TestShortRecordings(t *testing.T) {
	talk, music := heldOut(t).speech["reading"], heldOut(t).music["frontiers"][100*testRate:]
	for _, frames := range []int{0, 1, 2205, 2206, testRate / 2, testRate, 3 * testRate / 2} {
		for _, of := range [][]float32{talk[testRate:], music} {
			c := course(of[:frames])
			if want := (frames*StepsPerSecond + testRate - 1) / testRate; len(c.Active) != want || len(c.Speech) != want {
				t.Errorf("%d frames make %d and %d steps, want %d", frames, len(c.Active), len(c.Speech), want)
			}
		}
	}
	right, n := 0, 0
	for at := 0; at+3*testRate/2 <= len(talk); at += testRate {
		for _, of := range [][]float32{talk, music} {
			if c := course(of[at : at+3*testRate/2]); (c.shareOfSpeech() >= 0.5) == (&of[0] == &talk[0]) {
				right++
			}
			n++
		}
	}
	t.Logf("%d of %d recordings of 1.5 s judged rightly", right, n)
	if float64(right) < 0.85*float64(n) {
		t.Error("want 85 %")
	}
}

// In its steady state a detector allocates nothing but room for the course.
func TestWriteDoesNotAllocate(t *testing.T) {
	d := New(audio.Format{Rate: 44100, Layout: audio.Stereo})
	b := programme(44100, 1)
	for range 100 {
		d.Write(b)
	}
	d.levels.levels = append(make([]float32, 0, 10000), d.levels.levels...)
	d.framer.frames = append(make([]frame, 0, 50000), d.framer.frames...)
	if n := testing.AllocsPerRun(20, func() { d.Write(b) }); n != 0 {
		t.Errorf("%g allocations for a second of sound", n)
	}
}
