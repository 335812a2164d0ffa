package meter

import (
	"encoding/binary"
	"encoding/json"
	"fmt"
	"math"
	"testing"

	"evenshelf/engine/audio"
)

// FuzzMeter takes bytes for samples, over and over until there are enough frames, at any rate, in blocks of
// any length. Whatever they are: nothing panics, what is no number is counted, the reading is valid JSON and
// the same as at once, and where there is a loudness, there are peaks and levels.
func FuzzMeter(f *testing.F) {
	samples := func(values ...float64) (b []byte) {
		for _, v := range values {
			b = binary.LittleEndian.AppendUint32(b, math.Float32bits(float32(v)))
		}
		return b
	}
	f.Add([]byte{}, byte(0), byte(0), uint16(0), uint16(100))
	f.Add([]byte{1, 2, 3}, byte(0), byte(1), uint16(0), uint16(100))
	f.Add(samples(0.5, -0.5, 0.25), byte(0), byte(0), uint16(30000), uint16(777))
	f.Add(samples(math.NaN(), math.Inf(1), math.Inf(-1), 0.1), byte(1), byte(1), uint16(20000), uint16(31))
	f.Add(samples(math.MaxFloat32, -math.MaxFloat32, -math.MaxFloat32), byte(2), byte(1), uint16(60000), uint16(4096))
	f.Add(samples(1e-45, -1e-39, 0, 1e-38), byte(3), byte(2), uint16(50000), uint16(1))
	f.Add(samples(1e-4, math.MaxFloat32, 1e-20), byte(4), byte(2), uint16(65535), uint16(0))
	f.Add(samples(0, 0, 0, 1e-7), byte(5), byte(0), uint16(65535), uint16(1024))
	rates := []int{8000, 11025, 22050, 44100, 48000, 192000, 384000}
	f.Fuzz(func(t *testing.T, data []byte, rate, channels byte, frames, cuts uint16) {
		format := audio.Format{Rate: rates[int(rate)%len(rates)], Layout: audio.UsualLayout(1 + int(channels)%3)}
		b, bad := audio.NewBlock(format.Layout.Channels, int(frames)), int64(0)
		at := 0
		for i := range b.Frames() {
			for c := range b {
				if len(data) >= 4 {
					b[c][i] = math.Float32frombits(binary.LittleEndian.Uint32(data[at:]))
					if at += 4; at+4 > len(data) {
						at = 0
					}
				}
				if !audio.Defined(float64(b[c][i])) {
					bad++
				}
			}
		}
		m, err := New(format, audio.TwoLoudspeakers)
		if err != nil {
			t.Fatal(err)
		}
		read := func(block int) Reading {
			m.Reset()
			for from := 0; from < b.Frames(); from += block {
				m.Write(cut(b, from, min(b.Frames(), from+block)))
			}
			r, line := m.Finish()
			if m.BadSamples() != bad {
				t.Errorf("%d samples that are no numbers, want %d", m.BadSamples(), bad)
			}
			for i := range line.Peak {
				for _, v := range []float32{line.Momentary[i], line.ShortTerm[i], line.Peak[i]} {
					if math.IsNaN(float64(v)) || v > math.MaxFloat32 {
						t.Fatalf("step %d of the timeline is %g", i, v)
					}
				}
			}
			return r
		}
		r := read(1 + int(cuts))
		if text, err := json.Marshal(r); err != nil || !json.Valid(text) {
			t.Fatalf("%v in %s", err, text)
		}
		if again := read(max(1, b.Frames())); fmt.Sprint(again) != fmt.Sprint(r) {
			t.Errorf("in blocks %+v, at once %+v", r, again)
		}
		if !audio.Defined(r.Integrated) {
			return
		}
		for name, v := range map[string]float64{
			"max momentary": float64(r.MaxMomentary), "true peak": float64(r.TruePeak), "sample peak": float64(r.SamplePeak),
			"PLR": float64(r.PLR), "rms": float64(r.RMS), "crest factor": float64(r.CrestFactor),
		} {
			if !audio.Defined(v) {
				t.Errorf("of a programme of %v LUFS the %s is %g", r.Integrated, name, v)
			}
		}
		if r.TruePeak < audio.DBTP(r.SamplePeak) || r.CrestFactor < -1e-6 {
			t.Errorf("true peak %v, sample peak %v, crest factor %v", r.TruePeak, r.SamplePeak, r.CrestFactor)
		}
	})
}
