package demo

import (
	"math"

	"evenshelf/engine/audio"
)

// stage is a stereo mix being made.
type stage struct {
	rate int
	l, r track
}

func newStage(rate int, seconds float64) *stage {
	return &stage{rate, silence(rate, seconds), silence(rate, seconds)}
}

// frame returns the frame at a time.
func (s *stage) frame(seconds float64) int { return int(seconds * float64(s.rate)) }

// put mixes a sound in from a time on. Pan runs from −1 (left) to 1 (right) at constant power.
func (s *stage) put(seconds float64, src track, g, pan float64) {
	a := (pan + 1) * math.Pi / 4
	s.l.add(s.frame(seconds), src, g*math.Cos(a)*math.Sqrt2)
	s.r.add(s.frame(seconds), src, g*math.Sin(a)*math.Sqrt2)
}

// floor lays quiet independent noise under both channels: no microphone and no preamplifier is silent.
func (s *stage) floor(name string, rms float64) *stage {
	r := dice(name + " floor")
	for i := range s.l {
		s.l[i] += white(r) * rms * math.Sqrt(3)
		s.r[i] += white(r) * rms * math.Sqrt(3)
	}
	return s
}

// block returns the two channels as the engine's samples.
func (s *stage) block() audio.Block { return toBlock(s.l, s.r) }

// toBlock rounds tracks to float32.
func toBlock(tracks ...track) audio.Block {
	b := audio.NewBlock(len(tracks), len(tracks[0]))
	for c, t := range tracks {
		for i, x := range t {
			b[c][i] = float32(x)
		}
	}
	return b
}

// room adds the sound of a room to the mix: eight delay lines fed back through an orthogonal (Hadamard)
// mixing, each losing treble on every pass. Seconds is the time to −60 dB, wet the level of the room
// relative to the direct sound.
func (s *stage) room(seconds, wet float64) *stage {
	// Mutually prime lengths at 44.1 kHz, 20 to 50 ms, so that echoes never fall together.
	lengths := [8]int{887, 1033, 1171, 1327, 1511, 1723, 1949, 2179}
	var lines [8][]float64
	var at [8]int
	var keep, damp [8]float64
	for i, n := range lengths {
		n = n * s.rate / 44100
		lines[i] = make([]float64, n)
		keep[i] = math.Pow(10, -3*float64(n)/(seconds*float64(s.rate))) / math.Sqrt(8)
	}
	dull := 1 - math.Exp(-2*math.Pi*5000/float64(s.rate))
	for i := range s.l {
		var v [8]float64
		for k := range v {
			damp[k] += dull * (lines[k][at[k]] - damp[k])
			v[k] = damp[k]
		}
		s1, s2 := s.l[i], s.r[i]
		s.l[i] += wet * (v[0] - v[2] + v[4] - v[6])
		s.r[i] += wet * (v[1] - v[3] + v[5] - v[7])
		for step := 1; step < 8; step *= 2 { // fast Walsh-Hadamard transform
			for j := range v {
				if j&step == 0 {
					v[j], v[j|step] = v[j]+v[j|step], v[j]-v[j|step]
				}
			}
		}
		for k := range v {
			in := s1
			if k&1 == 1 {
				in = s2
			}
			lines[k][at[k]] = in + keep[k]*v[k]
			if at[k]++; at[k] == len(lines[k]) {
				at[k] = 0
			}
		}
	}
	return s
}
