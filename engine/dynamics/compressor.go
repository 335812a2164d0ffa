package dynamics

import (
	"math"

	"evenshelf/engine/audio"
)

// Compression says how a compressor works. It is part of a stored plan.
type Compression struct {
	// Threshold is a loudness of the moment, on the scale of LUFS: −0.691 + 10·log10 of the weighted power of
	// all channels, smoothed over 6 ms. The weighting and the sum are near those of ITU-R BS.1770; see ear.
	// Given as so many dB over a programme's loudness it means the same for every programme. One channel
	// counts once: where it is meant for two loudspeakers the threshold is 3.01 dB lower.
	Threshold audio.DB `json:"threshold_db"`
	Ratio     float64  `json:"ratio"`     // dB in for one dB out, above the knee; 1 or less: no compression
	Knee      audio.DB `json:"knee_db"`   // width of the soft knee
	Release   float64  `json:"release_s"` // time constant
}

// Reduction is the gain computer: what a level, dB, is lowered by, dB, 0 or more (Giannoulis, Massberg, Reiss,
// J. Audio Eng. Soc. 60(6), 2012).
func (c Compression) Reduction(level float64) float64 {
	slope := positive(1 - 1/max(1, c.Ratio))
	const most = 1000 // dB: no level is so far from another
	over, knee := min(level-float64(c.Threshold), most), min(positive(float64(c.Knee)), most)
	switch {
	case !(2*over > -knee): // also a level that is not a number
		return 0
	case 2*over < knee:
		return slope * (over + knee/2) * (over + knee/2) / (2 * knee)
	default:
		return slope * over
	}
}

// All that follows runs on a grid of milliseconds. Value k is that of the time k ms.
const (
	look = 10                 // ms, that the gain looks ahead and holds
	span = 2*look + 1         // values under the sliding maximum, and under the two boxes
	lead = breadth/2 + 2*look // ms from the time of a value to the end of the sound it depends on
)

// Compressor lowers what is loud for a moment by one gain for all channels. It adds no delay: see Ceiling.
// With L the level that ear hears, on a grid of milliseconds:
//
//	d[k] = what the gain computer asks for at L[k], dB
//	h[k] = max d[k−10 … k+10]
//	r[k] = max(h[k], h[k] + α·(r[k−1] − h[k]))   an exponential release
//	g[k] = −Σ c[i]·r[k−i], |i| ≤ 10              two centred boxes of 11 ms, Σc = 1
//
// and g, in dB, runs straight from one value to the next. Every r that g[k] averages over is at least d[k]: the
// gain has fallen in time. The maximum keeps the gain still within a period of a tone down to 25 Hz.
type Compressor struct {
	compression Compression
	rate        int
	line        line
	ear         ear
	alpha       float64

	wanted   [span]float64 // the last d
	released [span]float64 // the last r
	weights  [span]float64 // of the two boxes
	points   []float64     // −g of the milliseconds from first on, as far as known
	first    int64
	skip     int // milliseconds before the start of the sound that are still to come

	at, end int64   // next frame to come out, and where its millisecond ends
	gain    float64 // at that frame
	step    float64 // factor to the next frame's gain
	gains   []float64
	tally   tally
}

// NewCompressor returns a compressor.
func NewCompressor(f audio.Format, c Compression) *Compressor {
	rate := max(1, f.Rate)
	frames := (rate*(lead+1)+999)/1000 + 1 // a frame needs the values around it
	s := &Compressor{
		compression: c,
		rate:        rate,
		line:        newLine(f.Layout.Channels, frames),
		ear:         newEar(f),
		alpha:       math.Exp(-1 / (1000 * positive(c.Release))),
		points:      make([]float64, 0, 64+2000*(audio.BlockFrames+frames)/rate),
		skip:        lead - 1,
		at:          -int64(frames),
		gain:        1,
		step:        1,
		gains:       make([]float64, audio.BlockFrames),
		tally:       newTally(rate),
	}
	for i := range s.weights {
		s.weights[i] = float64(look+1-max(i-look, look-i)) / ((look + 1) * (look + 1))
	}
	return s
}

// CountTwice has each channel count twice: what is put in stands for two that are the same, and is lowered as they would
// be, to the last bit. Call it before Process.
func (c *Compressor) CountTwice() {
	for i := range c.ear.channels {
		c.ear.channels[i].scale *= 2
	}
}

// Process takes the next block and returns sound that is ready, in order; at the start that is less than
// was put in. The block returned is valid until the next call. Blocks may have up to audio.BlockFrames frames.
func (c *Compressor) Process(b audio.Block) audio.Block {
	c.line.inside += b.Frames()
	return c.run(b)
}

// Flush returns, block by block, what the compressor still holds back; nil when there is nothing left.
// After that as many frames have come out as went in.
func (c *Compressor) Flush() audio.Block {
	if b := c.line.tail(); b != nil {
		return c.run(b)
	}
	return nil
}

// Work returns what was taken off the sound that has come out so far.
func (c *Compressor) Work() Work { return c.tally.result() }

func (c *Compressor) run(b audio.Block) audio.Block {
	c.ear.hear(b, c.level)
	n := b.Frames()
	gains := c.gains[:n]
	out := c.line.push(b)
	moving := c.follow(gains)
	from, to := c.line.ready(n)
	if moving {
		for _, x := range out {
			for i, g := range gains {
				x[i] = float32(float64(x[i]) * g)
			}
		}
		c.tally.add(gains[from:to])
	} else {
		c.tally.idle(to - from)
	}
	return out.Cut(out, from, to)
}

// level takes the level of the next millisecond, and makes the gain of the one that it completes.
func (c *Compressor) level(power float64) {
	copy(c.wanted[:], c.wanted[1:])
	c.wanted[span-1] = c.compression.Reduction(-0.691 + 10*math.Log10(power))
	h := 0.0
	for _, d := range c.wanted {
		h = max(h, d)
	}
	r := max(h, h+c.alpha*(c.released[span-1]-h))
	if r < 1e-5 { // dB: the release has an end
		r = 0
	}
	copy(c.released[:], c.released[1:])
	c.released[span-1] = r
	if c.skip > 0 {
		c.skip--
		return
	}
	g := 0.0
	for i, w := range c.weights {
		g += w * c.released[i]
	}
	c.points = append(c.points, g)
}

// follow writes the gain of each frame that comes out next and reports whether any differs from 1.
func (c *Compressor) follow(gains []float64) bool {
	moving := false
	for i := 0; i < len(gains); {
		n := len(gains) - i
		if c.at < 0 {
			n = min(n, int(-c.at))
		} else {
			if c.at >= c.end {
				c.turn()
			}
			n = min(n, int(c.end-c.at))
		}
		g, step := c.gain, c.step
		moving = moving || g != 1 || step != 1
		for j := range gains[i : i+n] {
			gains[i+j] = g
			g *= step
		}
		c.gain = g
		c.at += int64(n)
		i += n
	}
	return moving
}

// turn starts the millisecond that frame at is in.
func (c *Compressor) turn() {
	k := c.at * 1000 / int64(c.rate)
	done := int(k - c.first)
	c.points = c.points[:copy(c.points, c.points[done:])]
	c.first = k
	from, to := c.points[0], c.points[1]
	past := float64(c.at*1000)/float64(c.rate) - float64(k)
	const perDB = -math.Ln10 / 20
	c.gain = math.Exp(perDB * (from + (to-from)*past))
	c.step = math.Exp(perDB * (to - from) * 1000 / float64(c.rate))
	c.end = start(k+1, c.rate)
}

// start returns the first frame of millisecond k: the first that is not before it.
func start(k int64, rate int) int64 { return (k*int64(rate) + 999) / 1000 }
