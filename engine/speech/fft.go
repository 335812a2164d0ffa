package speech

import "math"

// spectrum computes power spectra of real frames of a fixed even length, a power of two. It is a
// decimation in time with radix 4 (and one step of radix 2 where the length asks for it) over half as
// many complex numbers. A quarter of the time goes into this, and the library's general
// transform takes five times as long, so it is spelled out; the test compares the two.
type spectrum struct {
	order    []int // where each complex sample comes from
	re, im   []float64
	twiddles []float64 // for each pass of radix 4 in turn: cos and −sin of w, w², w³
	untangle []float64 // cos and −sin for taking the two interleaved halves apart
}

func newSpectrum(length int) *spectrum {
	n := length / 2
	s := &spectrum{re: make([]float64, n), im: make([]float64, n)}
	passes := []int{}
	m := 1
	if bitsOf(n)%2 == 1 {
		m = 2
	}
	for ; m < n; m *= 4 {
		passes = append(passes, 4)
		for j := range m {
			for q := 1; q < 4; q++ {
				sin, cos := math.Sincos(-2 * math.Pi * float64(j*q) / float64(4*m))
				s.twiddles = append(s.twiddles, cos, sin)
			}
		}
	}
	s.order = digits(n, 1, 0, passes)
	for k := range n {
		sin, cos := math.Sincos(-2 * math.Pi * float64(k) / float64(length))
		s.untangle = append(s.untangle, cos, sin)
	}
	return s
}

// bitsOf is the binary logarithm of a power of two.
func bitsOf(n int) (b int) {
	for ; n > 1; n /= 2 {
		b++
	}
	return b
}

// digits lists the input indices in the order the passes want them; the last pass is of the outermost radix.
func digits(n, stride, offset int, passes []int) []int {
	if n == 1 {
		return []int{offset}
	}
	radix := 2
	if len(passes) > 0 {
		radix, passes = passes[len(passes)-1], passes[:len(passes)-1]
	}
	var all []int
	for q := range radix {
		all = append(all, digits(n/radix, stride*radix, offset+q*stride, passes)...)
	}
	return all
}

// power writes the squared magnitudes of bins 0 … len(dst)-1, fewer than half the length, of the frame x,
// weighted by the window; past the window's end the frame counts as zero.
//
//go:norace
func (s *spectrum) power(dst, x, window []float64) {
	re, im := s.re, s.im
	n := len(re)
	x = x[:len(window)]
	for i, from := range s.order {
		if a := 2 * from; a+1 < len(window) {
			re[i], im[i] = x[a]*window[a], x[a+1]*window[a+1]
		} else if a < len(window) {
			re[i], im[i] = x[a]*window[a], 0
		} else {
			re[i], im[i] = 0, 0
		}
	}
	m, tw := 4, s.twiddles
	if bitsOf(n)%2 == 1 {
		for i := 0; i+1 < n; i += 2 {
			re[i], re[i+1] = re[i]+re[i+1], re[i]-re[i+1]
			im[i], im[i+1] = im[i]+im[i+1], im[i]-im[i+1]
		}
		m = 2
	} else { // the first pass turns nothing
		tw = tw[6:]
		for i := 0; i+4 <= n; i += 4 {
			r, j := (*[4]float64)(re[i:]), (*[4]float64)(im[i:])
			pr, pi, mr, mi := r[0]+r[2], j[0]+j[2], r[0]-r[2], j[0]-j[2]
			qr, qi, nr, ni := r[1]+r[3], j[1]+j[3], r[1]-r[3], j[1]-j[3]
			*r = [4]float64{pr + qr, mr + ni, pr - qr, mr - ni}
			*j = [4]float64{pi + qi, mi - nr, pi - qi, mi + nr}
		}
	}
	for ; m < n; m *= 4 {
		for at := 0; at < n; at += 4 * m {
			r0, r1, r2, r3 := re[at:][:m], re[at+m:][:m], re[at+2*m:][:m], re[at+3*m:][:m]
			i0, i1, i2, i3 := im[at:][:m], im[at+m:][:m], im[at+2*m:][:m], im[at+3*m:][:m]
			w := tw[:6*m]
			for j := range r0 {
				v := (*[6]float64)(w[6*j:])
				c1, s1, c2, s2, c3, s3 := v[0], v[1], v[2], v[3], v[4], v[5]
				a, b := r0[j], i0[j]
				c, d := r1[j]*c1-i1[j]*s1, r1[j]*s1+i1[j]*c1
				e, f := r2[j]*c2-i2[j]*s2, r2[j]*s2+i2[j]*c2
				g, h := r3[j]*c3-i3[j]*s3, r3[j]*s3+i3[j]*c3
				pr, pi, mr, mi := a+e, b+f, a-e, b-f
				qr, qi, nr, ni := c+g, d+h, c-g, d-h
				r0[j], i0[j] = pr+qr, pi+qi
				r1[j], i1[j] = mr+ni, mi-nr
				r2[j], i2[j] = pr-qr, pi-qi
				r3[j], i3[j] = mr-ni, mi+nr
			}
		}
		tw = tw[6*m:]
	}
	for k := range dst {
		l := (n - k) % n
		er, ei := (re[k]+re[l])/2, (im[k]-im[l])/2
		or, oi := (im[k]+im[l])/2, (re[l]-re[k])/2
		cos, sin := s.untangle[2*k], s.untangle[2*k+1]
		xr, xi := er+or*cos-oi*sin, ei+or*sin+oi*cos
		dst[k] = xr*xr + xi*xi
	}
}
