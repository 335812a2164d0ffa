package speech

import (
	"math"

	"evenshelf/engine/audio"
)

// leveler takes the level of every step of the downmix: its mean power without DC, in dB re full scale.
type leveler struct {
	rate    int64
	at, end int64 // frames taken; frame at which the step ends
	x, xx   float64
	levels  []float32 // of the finished steps
}

// lowest is the level of digital silence in dB; it is below anything 32-bit samples of use can hold.
const lowest = -200

func newLeveler(rate int) *leveler {
	l := &leveler{rate: int64(max(rate, 1))}
	l.end = l.boundary(1)
	return l
}

// boundary returns the frame at which n steps end.
func (l *leveler) boundary(n int) int64 { return audio.Boundary(int64(n), StepsPerSecond, l.rate) }

func (l *leveler) add(sound []float64) {
	for len(sound) > 0 {
		for l.at == l.end { // a rate below that of the steps
			l.step()
		}
		n := int(min(int64(len(sound)), l.end-l.at))
		x, xx := moments(sound[:n])
		l.x, l.xx = l.x+x, l.xx+xx
		sound = sound[n:]
		if l.at += int64(n); l.at == l.end {
			l.step()
		}
	}
}

// finish ends a step that has begun.
func (l *leveler) finish() {
	if l.at > l.boundary(len(l.levels)) {
		l.step()
	}
}

// step ends a step; the last one may be short.
func (l *leveler) step() {
	n := max(1, float64(l.at-l.boundary(len(l.levels))))
	mean := l.x / n
	l.levels = append(l.levels, float32(max(lowest, 10*math.Log10(max(0, l.xx/n-mean*mean)))))
	l.x, l.xx = 0, 0
	l.end = l.boundary(len(l.levels) + 1)
}

// moments returns the sum of x and that of its squares.
//
//go:norace
func moments(x []float64) (sum, squares float64) {
	var a, b, c, d, e, f, g, h float64
	for ; len(x) >= 4; x = x[4:] {
		p, q, r, s := x[0], x[1], x[2], x[3]
		a, b, c, d = a+p, b+q, c+r, d+s
		e, f, g, h = e+p*p, f+q*q, g+r*r, h+s*s
	}
	for _, p := range x {
		a, e = a+p, e+p*p
	}
	return a + b + c + d, e + f + g + h
}
