package speech

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/dsp/fourier"
)

// The power spectrum is that of Gonum's transform, for even and odd powers of two and for windows that fill
// the frame or not.
func TestSpectrumAgainstGonum(t *testing.T) {
	r := rand.New(rand.NewPCG(3, 4))
	for _, length := range []int{8, 16, 32, 256, 512} {
		for _, filled := range []int{length, length*5/8 + 1} {
			x, window, product := make([]float64, filled), make([]float64, filled), make([]float64, length)
			for i := range x {
				x[i], window[i] = r.NormFloat64(), r.Float64()
				product[i] = x[i] * window[i]
			}
			got := make([]float64, length/2)
			newSpectrum(length).power(got, x, window)
			want := fourier.NewFFT(length).Coefficients(nil, product)
			for k, p := range got {
				if w := cmplx.Abs(want[k]); math.Abs(p-w*w) > 1e-10*float64(length) {
					t.Errorf("length %d, %d filled, bin %d: %g, want %g", length, filled, k, p, w*w)
				}
			}
		}
	}
}

func TestDecibels(t *testing.T) {
	for _, v := range []float64{1e-30, 1e-12, 0.1, 0.4999, 0.5, math.Sqrt2 / 2, 0.70710679, 0.999999, 1, 1.4142, 1.4143, 2, 3, 1e9, 1e82} {
		if got, want := decibels(v), 10*math.Log10(v); math.Abs(got-want) > 1e-6 {
			t.Errorf("%g is %.8f dB, want %.8f", v, got, want)
		}
	}
}
