package ride

import "math"

const (
	nodesPerSecond = 2700 // at least, at which the gain is found exactly: it may move by 200 dB a second
	perNeper       = math.Ln10 / 20
)

// Fill writes the linear gain of frame from+i at a sampling rate to dst[i]. Between values of the curve it is a
// monotone cubic (F. Fritsch, R. Carlson, SIAM J. Numer. Anal. 17(2), 1980, with the slopes of F. Fritsch,
// J. Butland, SIAM J. Sci. Stat. Comput. 5(2), 1984), which never passes the values it lies between. Before the
// first and after the last value the gain stands still; that of an empty curve is 1.
//
// The cubic is taken at nodes a few samples apart, and the gain runs straight between them, to within 0.001 dB.
// Nodes lie at multiples of their distance from frame 0, so that it does not matter how the sound is cut into blocks.
func (c Curve) Fill(dst []float64, from int64, rate int) {
	if len(c) == 0 || rate <= 0 {
		fill(dst, 1)
		return
	}
	apart := int64(1)
	for apart*2*nodesPerSecond <= int64(rate) {
		apart *= 2
	}
	node := from &^ (apart - 1) // rounds down, below 0 too
	now := c.at(node, int64(rate))
	for len(dst) > 0 {
		next := c.at(node+apart, int64(rate))
		skip := int(from - node)
		part := dst[:min(len(dst), int(apart)-skip)]
		if next == now {
			fill(part, now)
		} else {
			slope := (next - now) / float64(apart)
			for i := range part {
				part[i] = now + slope*float64(skip+i)
			}
		}
		dst, from = dst[len(part):], from+int64(len(part))
		node, now = node+apart, next
	}
}

// at returns the linear gain at a frame.
func (c Curve) at(frame, rate int64) float64 { return math.Exp(perNeper * c.decibels(frame, rate)) }

func (c Curve) decibels(frame, rate int64) float64 {
	last := len(c) - 1
	if frame <= 0 {
		return float64(c[0])
	}
	second, rest := frame/rate, frame%rate*StepsPerSecond
	if second > int64(last) {
		return float64(c[last])
	}
	k := int(second)*StepsPerSecond + int(rest/rate)
	if k >= last {
		return float64(c[last])
	}
	a, b := float64(c[k]), float64(c[k+1])
	before, here, after := 0.0, b-a, 0.0
	if k > 0 {
		before = a - float64(c[k-1])
	}
	if k+2 <= last {
		after = float64(c[k+2]) - b
	}
	if before == 0 && here == 0 && after == 0 {
		return a
	}
	m, n := slope(before, here), slope(here, after)
	x := float64(rest%rate) / float64(rate)
	return a + x*(m+x*(3*here-2*m-n+x*(m+n-2*here)))
}

// slope of the cubic at a value with those differences on its two sides: their harmonic mean, or 0 at a peak.
func slope(before, after float64) float64 {
	if before*after <= 0 {
		return 0
	}
	return 2 * before * after / (before + after)
}
