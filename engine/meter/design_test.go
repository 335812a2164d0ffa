package meter

import (
	"math"
	"slices"
	"testing"

	"evenshelf/engine/audio"
)

// response returns the response of both stages at a rate in Hz, in dB over Hz.
func response(rate float64) func(hz float64) float64 {
	shelf, pass := design(rate)
	return func(hz float64) float64 {
		w := 2 * math.Pi * hz / rate
		return 10 * math.Log10(shelf.gain(w)*pass.gain(w))
	}
}

// The response at 48 kHz, worked out from BS.1770-5 Tables 1 and 2 in double precision outside this code.
func TestPrintedResponse(t *testing.T) {
	for hz, want := range map[float64]float64{
		20: -13.275, 40: -5.567, 100: -1.134, 500: 0.043, 997: 0.6910, 1000: 0.6977, 2000: 3.071, 4000: 3.968, 8000: 4.039, 16000: 4.043,
	} {
		near(t, "K response", response(48000)(hz), want, 0.0006)
	}
}

// Every rate must have the response that is printed for 48 kHz, over the band that carries sound: 20 Hz to
// 0.45 of the rate. What the product promises is 0.02 dB.
func TestEveryRateHasThePrintedResponse(t *testing.T) {
	for _, rate := range []float64{
		8000, 11025, 12000, 16000, 22050, 24000, 32000, 37800, 44100, 47999, 48000, 50000, 64000, 88200, 96000, 176400, 192000, 352800, 384000,
	} {
		decibels, worst, where := response(rate), 0.0, 0.0
		for hz := 20.0; hz <= 0.45*min(rate, 48000); hz *= 1.01 {
			if d := math.Abs(decibels(hz) - 10*math.Log10(printedGain(hz))); d > worst {
				worst, where = d, hz
			}
		}
		t.Logf("%6.0f Hz: %.5f dB, at %.0f Hz", rate, worst, where)
		limit := 0.0002
		if rate < 32000 {
			limit = 0.01
		}
		if worst > limit {
			t.Errorf("at %g Hz the response is off by %.5f dB", rate, worst)
		}
	}
}

// The filters must forget, or a reading would depend on what was measured an hour before.
func TestSectionsAreStable(t *testing.T) {
	for rate := 8000.0; rate <= 384000; rate *= 1.05 {
		shelf, pass := design(rate)
		for _, q := range []biquad{shelf, pass} {
			if !(math.Abs(q.a2) < 1 && math.Abs(q.a1) < 1+q.a2) { // Jury's criterion
				t.Fatalf("unstable at %g Hz: %+v", rate, q)
			}
		}
	}
}

// BS.1770-5 Tables 3 to 5, and the reading of masks given at weights.
func TestWeights(t *testing.T) {
	const side = 1.41
	const topFronts, topBacks = audio.TopFrontLeft | audio.TopFrontRight, audio.TopBackLeft | audio.TopBackRight
	tests := []struct {
		name   string
		layout audio.Layout
		want   []float64
	}{
		{"mono", audio.Mono, []float64{1}},
		{"stereo", audio.Stereo, []float64{1, 1}},
		{"quad", audio.UsualLayout(4), []float64{1, 1, side, side}},
		{"5.0", audio.UsualLayout(5), []float64{1, 1, 1, side, side}},
		{"5.1 with backs", audio.UsualLayout(6), []float64{1, 1, 1, 0, side, side}},
		{"5.1 with sides", audio.Layout{Channels: 6, Mask: 0x60f}, []float64{1, 1, 1, 0, side, side}},
		{"6.1", audio.UsualLayout(7), []float64{1, 1, 1, 0, 1, side, side}},
		{"7.1", audio.UsualLayout(8), []float64{1, 1, 1, 0, 1, 1, side, side}},
		{"5.1.4", audio.Layout{Channels: 10, Mask: 0x3f | topFronts | topBacks}, []float64{1, 1, 1, 0, side, side, 1, 1, 1, 1}},
		{"5.1.4 with sides", audio.Layout{Channels: 10, Mask: 0x60f | topFronts | topBacks}, []float64{1, 1, 1, 0, side, side, 1, 1, 1, 1}},
		{"7.1.2", audio.Layout{Channels: 10, Mask: 0x63f | topFronts}, []float64{1, 1, 1, 0, 1, 1, side, side, 1, 1}},
		{"7.1.4", audio.Layout{Channels: 12, Mask: 0x63f | topFronts | topBacks}, []float64{1, 1, 1, 0, 1, 1, side, side, 1, 1, 1, 1}},
		{"top and back centre", audio.Layout{Channels: 4, Mask: 0x3 | audio.BackCentre | audio.TopCentre}, []float64{1, 1, 1, 1}},
		{"unknown", audio.Layout{Channels: 3}, []float64{1, 1, 1}},
		{"mask of another count", audio.Layout{Channels: 3, Mask: 0x60f}, []float64{1, 1, 1}},
	}
	for _, test := range tests {
		if got := weights(test.layout, audio.OneChannel); !slices.Equal(got, test.want) {
			t.Errorf("%s: %v, want %v", test.name, got, test.want)
		}
	}
}

// Formats that cannot be measured are refused, not guessed at.
func TestNewRefuses(t *testing.T) {
	for _, f := range []audio.Format{
		{Rate: 0, Layout: audio.Stereo}, {Rate: 7999, Layout: audio.Stereo}, {Rate: 384001, Layout: audio.Stereo},
		{Rate: 48000}, {Rate: 48000, Layout: audio.Layout{Channels: -1}},
	} {
		if _, err := New(f, audio.OneChannel); err == nil {
			t.Errorf("%+v was taken", f)
		}
	}
}
