package media

import (
	"bytes"
	"encoding/binary"
	"encoding/json"
	"math"
	"os/exec"
	"slices"
	"testing"
)

func shapedWords(rate, bits int) Spec {
	s := words(1, bits)
	s.Shaped, s.Format.Rate = true, rate
	return s
}

// filterOf returns the noise's filter as numbers, 1 first.
func filterOf(rate int) []float64 {
	filter := []float64{1}
	for _, w := range shape(rate) {
		filter = append(filter, float64(w)/(1<<weightBits))
	}
	return filter
}

// numpy runs a script over numbers on its standard input and returns what it prints as JSON.
func numpy[T any](t *testing.T, script string, numbers []float64, args ...string) (answer T) {
	t.Helper()
	var in bytes.Buffer
	if err := binary.Write(&in, binary.LittleEndian, numbers); err != nil {
		t.Fatal(err)
	}
	cmd := exec.Command("/usr/bin/python3", append([]string{"-c", "import json, sys, numpy as np\nx = np.frombuffer(sys.stdin.buffer.read())\n" + script}, args...)...)
	cmd.Stdin = &in
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("this test needs python3-numpy: %v", err)
	}
	if err := json.Unmarshal(out, &answer); err != nil {
		t.Fatal(err)
	}
	return answer
}

// Gerzon and Craven's theorem: over all frequencies, a shaper's logarithmic response is 0 dB on average if no zero of its
// filter lies outside the unit circle, and more if one does. Numpy finds the zeros, and the response at the ear's best.
func TestShapeIsOptimal(t *testing.T) {
	for _, rate := range []int{8000, 16000, 22050, 32000, 44100, 48000, 88200, 96000, 192000} {
		got := numpy[[3]float64](t, `
h = np.abs(np.fft.rfft(x, 1 << 16))
print(json.dumps([np.abs(np.roots(x)).max(), (20*np.log10(h))[:-1].mean(), 20*np.log10(h.max())]))`, filterOf(rate))
		if got[0] > 0.97 || math.Abs(got[1]) > 0.01 || got[2] > 17 {
			t.Errorf("%d Hz: greatest zero %.3f, average %.4f dB, most %.1f dB", rate, got[0], got[1], got[2])
		}
	}
}

// The noise is what theory says: Δ²/4 behind the filter, in every band; and 15 dB under flat dither's where the ear is
// best, 2 to 5 kHz. A tone makes no difference.
func TestShapedNoise(t *testing.T) {
	for _, rate := range []int{44100, 48000} {
		filter := filterOf(rate)
		gain := 0.0
		for _, a := range filter {
			gain += a * a
		}
		for name, x := range map[string][]float64{"tone": tone(16, 10, -60), "offset": slices.Repeat([]float64{0.37}, 480_000)} {
			_, errs := quantiseAs(shapedWords(rate, 16), 0, x)
			mean, power := moments(errs)
			if dB := 10 * math.Log10(power/0.25/gain); math.Abs(dB) > 0.1 || math.Abs(mean) > 0.006 {
				t.Errorf("%d Hz, %s: noise %.3f dB over theory's, mean %.4f LSB", rate, name, dB, mean)
			}
			got := numpy[struct{ Off, Best float64 }](t, `
rate, h, n = float(sys.argv[1]), np.array(json.loads(sys.argv[2])), 4096
p = np.mean(np.abs(np.fft.rfft(x[:len(x)//n*n].reshape(-1, n)*np.hanning(n), axis=1))**2, axis=0)/np.sum(np.hanning(n)**2)
f = np.fft.rfftfreq(n, 1/rate)
bands = [b for b in np.array_split(np.arange(8, len(f)-8), 40)]
want = 0.25*np.abs(np.fft.rfft(h, n))**2
off = max(abs(10*np.log10(p[b].mean()/want[b].mean())) for b in bands)
best = (f >= 2000) & (f <= 5000)
print(json.dumps({"off": off, "best": 10*np.log10(p[best].mean()/0.25)}))`, errs, jsonOf(t, rate), jsonOf(t, filter))
			t.Logf("%d Hz, %s: total %+.1f dB, 2 to 5 kHz %.1f dB re flat dither; a band is off by up to %.2f dB", rate, name, 10*math.Log10(gain), got.Best, got.Off)
			if got.Off > 1 || got.Best > -15 {
				t.Errorf("%d Hz, %s: a band is %.2f dB off, 2 to 5 kHz are %.1f dB re flat dither", rate, name, got.Off, got.Best)
			}
		}
	}
}

func jsonOf(t *testing.T, v any) string {
	b, err := json.Marshal(v)
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

// As in TestDitherMakesNoHarmonics: a bin has 16 times its mean once in 9 million.
func TestShapedNoiseHasNoHarmonics(t *testing.T) {
	const seconds = 5
	filter := filterOf(48000)
	for _, dBFS := range []float64{-60, -70, -80, -90} {
		_, errs := quantiseAs(shapedWords(48000, 16), 0, tone(16, seconds, dBFS))
		for harmonic := 1; harmonic <= 9; harmonic++ {
			var re, im float64
			for k, a := range filter {
				s, c := math.Sincos(2 * math.Pi * 997 * float64(harmonic) / 48000 * float64(k))
				re, im = re+a*c, im+a*s
			}
			floor := 2 * 0.25 * (re*re + im*im) / float64(seconds*48000)
			if over := partial(errs, 997*float64(harmonic)) / floor; over > 16 {
				t.Errorf("%g dBFS: harmonic %d is %.1f dB over the noise", dBFS, harmonic, 10*math.Log10(over))
			}
		}
	}
}

// Silence is silent from its first sample on, whatever was before it; other whole numbers pass unchanged from the first
// where nothing was, and else after as many as the shaper remembers. What comes then starts afresh.
func TestShapedWholeNumbers(t *testing.T) {
	var x []float64
	for range 10 {
		x = append(x, 5, -7, 0, 1000)
	}
	whole := len(x)
	x = append(x, tone(16, 1, -20)...)
	loud := len(x)
	x = append(x, make([]float64, 100)...)
	silent := len(x)
	x = append(x, tone(16, 1, -20)...)
	steps := len(x)
	for i := range 200 {
		x = append(x, float64(i+1))
	}
	out, _ := quantiseAs(shapedWords(44100, 16), 0, x)
	for i, v := range x {
		exact := i < whole || i >= loud && i < silent || i >= steps+shapeOrder
		if exact && float64(out[i]) != v {
			t.Fatalf("sample %d, %v, became %d", i, v, out[i])
		}
	}
	// Zeros strewn into quiet music stay zeros and do not spoil the noise around them.
	x = tone(16, 10, -80)
	for i := range x {
		if i%20 == 0 {
			x[i] = 0
		}
	}
	out, errs := quantiseAs(shapedWords(48000, 16), 0, x)
	for i := 0; i < len(x); i += 20 {
		if out[i] != 0 {
			t.Fatalf("the zero at %d became %d", i, out[i])
		}
	}
	best := numpy[float64](t, `
n = 4096
p = np.mean(np.abs(np.fft.rfft(x[:len(x)//n*n].reshape(-1, n)*np.hanning(n), axis=1))**2, axis=0)/np.sum(np.hanning(n)**2)
f = np.fft.rfftfreq(n, 1/48000)
print(10*np.log10(p[(f >= 2000) & (f <= 5000)].mean()/0.25))`, errs)
	if best > -10 {
		t.Errorf("with zeros in it the noise from 2 to 5 kHz is %.1f dB re flat dither", best)
	}
}

// Whatever comes in, the result is off by no more than what the shaper says, but for clipping; and it recovers from that.
func TestShapedIsBounded(t *testing.T) {
	sum := 0.0
	for _, a := range filterOf(48000) {
		sum += math.Abs(a)
	}
	t.Logf("at most %.2f LSB at 48 kHz", 1.5*sum)
	if sum > 5 {
		t.Errorf("the weights add up to %.2f", sum)
	}
	x := tone(16, 4, -1)
	for i := range x {
		switch {
		case i > 20_000 && i < 30_000:
			x[i] *= 2 // clips
		case i%7 < 3:
			x[i] = math.Round(x[i]) // whole numbers strewn in
		case i == 50_000:
			x[i] = math.Inf(1)
		case i == 60_000:
			x[i] = math.NaN()
		}
	}
	out, errs := quantiseAs(shapedWords(48000, 16), 0, x)
	for i, e := range errs {
		clips := math.Abs(x[i]) > 32767-1.5*sum
		if !clips && !math.IsNaN(e) && math.Abs(e) > 1.5*sum {
			t.Fatalf("sample %d is off by %.2f LSB", i, e)
		}
		if out[i] > 32767 || out[i] < -32768 {
			t.Fatalf("sample %d became %d", i, out[i])
		}
	}
}

func TestShapedRepeatsHoweverItIsCut(t *testing.T) {
	in := programme(1, 10_000, 24, 0.8)[0]
	clear(in[4000:4100])
	whole, parts := make([]int32, len(in)), make([]int32, len(in))
	first := newQuantisers(shapedWords(48000, 16))[0]
	first.quantise(whole, in, in)
	q := newQuantisers(shapedWords(48000, 16))[0]
	for i := 0; i < len(in); {
		n := min(1+i%701, len(in)-i)
		q.quantise(parts[i:i+n], in[i:i+n], in[i:i+n])
		i += n
	}
	if !slices.Equal(whole, parts) {
		t.Error("the same sound in other blocks made other bytes")
	}
}

// What the spec says about the shape of noise reaches every writer that rounds.
func TestEveryWriterShapes(t *testing.T) {
	aiff := Spec{Container: "aiff", Codec: "pcm_s16be", BitDepth: 16}
	alac := Spec{Container: "mp4", Codec: "alac", BitDepth: 16}
	snd := programme(2, 5000, 24, 0.7)
	for name, test := range map[string]struct {
		box  *Toolbox
		spec Spec
	}{
		"wav": {withoutFFmpeg(), wavSpec(16, false)}, "aiff": {withoutFFmpeg(), aiff}, "alac": {withFFmpeg(t), alac},
		"flac": {withFFmpeg(t), flacSpec(16, 48000)}, "flac native": {withoutFFmpeg(), flacSpec(16, 48000)},
	} {
		worst := map[bool]float64{}
		for _, shaped := range []bool{false, true} {
			test.spec.Shaped, test.spec.Format = shaped, stereo(48000)
			path := t.TempDir() + "/a.part"
			write(t, test.box, path, test.spec, snd)
			got, _ := decode(t, test.box, path)
			for c := range snd {
				for i := range snd[c] {
					worst[shaped] = max(worst[shaped], math.Abs(float64(got[c][i]-snd[c][i]))*32768)
				}
			}
		}
		if worst[false] > 1.5 || worst[true] < 2 || worst[true] > 7.2 {
			t.Errorf("%s: off by up to %.2f LSB, shaped %.2f", name, worst[false], worst[true])
		}
	}
}

func BenchmarkQuantiseShaped(b *testing.B) {
	in, out := programme(1, 48_000, 24, 0.8)[0], make([]int32, 48_000)
	q := newQuantisers(shapedWords(48000, 16))[0]
	b.ReportAllocs()
	for b.Loop() {
		q.quantise(out, in, in)
	}
	b.ReportMetric(float64(b.N)/b.Elapsed().Seconds(), "x-realtime")
}
