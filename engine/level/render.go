package level

import (
	"context"
	"errors"
	"io"

	"evenshelf/engine/audio"
	"evenshelf/engine/dynamics"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
)

// Work is what a rendering took off the sound, step by step.
type Work struct {
	Compressed dynamics.Work // by the compressor; empty if there was none
	Limited    dynamics.Work // by the ceiling; empty if there was none
}

// Render carries a plan out: it reads src to its end and writes the levelled sound to sink, frame for
// frame: ride, compressor, steady gain, ceiling. A source that breaks off early is rendered as far as it
// goes. Equal input and plan give equal output on any machine. sink is not closed.
func Render(ctx context.Context, src audio.Source, plan Plan, sink audio.Sink) (Work, error) {
	if plan.alike {
		src, sink = halfOf(src), twiceTo(sink)
	}
	c := newChain(src.Format(), plan)
	_, err := audio.Each(src, func(b audio.Block) error {
		return errors.Join(sink.WriteBlock(c.process(b)), context.Cause(ctx))
	})
	if err != nil && !errors.Is(err, io.ErrUnexpectedEOF) {
		return Work{}, err
	}
	for b := c.flush(); b != nil; b = c.flush() {
		if err := sink.WriteBlock(b); err != nil {
			return Work{}, err
		}
	}
	return c.work(), nil
}

// chain is a plan at work on one recording.
type chain struct {
	plan       Plan
	rate       int
	at         int64     // the next frame that comes in
	gains      []float64 // of the ride, for one block
	compressor *dynamics.Compressor
	ceiling    *dynamics.Ceiling
}

func newChain(f audio.Format, plan Plan) *chain {
	c := &chain{plan: plan, rate: f.Rate}
	if plan.Ride != nil {
		c.gains = make([]float64, audio.BlockFrames)
	}
	if plan.Compressor != nil {
		c.compressor = dynamics.NewCompressor(f, *plan.Compressor)
		if plan.alike {
			c.compressor.CountTwice()
		}
	}
	if plan.Limit {
		c.ceiling = dynamics.NewCeiling(f, plan.Ceiling, timing(plan.Limiter), func() dynamics.PeakReader {
			return meter.NewEnvelope(f.Layout.Channels)
		})
	}
	return c
}

// timing is a limiter's in seconds.
func timing(l profile.Limiter) dynamics.Timing {
	return dynamics.Timing{LookAhead: l.LookAhead / 1000, Hold: l.Hold / 1000, Release: l.Release / 1000}
}

// process takes a block, which it may change, and returns what is ready.
func (c *chain) process(b audio.Block) audio.Block {
	if c.plan.Ride != nil {
		gains := c.gains[:b.Frames()]
		c.plan.Ride.Gain.Fill(gains, c.at, c.rate)
		c.at += int64(len(gains))
		for _, x := range b {
			for i, g := range gains {
				x[i] = float32(float64(x[i]) * g)
			}
		}
	}
	if c.compressor != nil {
		b = c.compressor.Process(b)
	}
	return c.finish(b)
}

// finish does what comes after the compressor.
func (c *chain) finish(b audio.Block) audio.Block {
	amplify(b, c.plan.Gain.Linear())
	if c.ceiling != nil {
		b = c.ceiling.Process(b)
	}
	return b
}

// flush returns, block by block, what is still inside; nil when there is nothing left.
func (c *chain) flush() audio.Block {
	if c.compressor != nil {
		if b := c.compressor.Flush(); b != nil {
			return c.finish(b)
		}
	}
	if c.ceiling != nil {
		return c.ceiling.Flush()
	}
	return nil
}

// work returns what has been taken off; call it after the last flush.
func (c *chain) work() (w Work) {
	if c.compressor != nil {
		w.Compressed = c.compressor.Work()
	}
	if c.ceiling != nil {
		w.Limited = c.ceiling.Work()
	}
	return w
}

// amplify multiplies every sample of b, in place. What is not a finite number then becomes silence, as it was to
// the meter: nobody should have to listen to it.
func amplify(b audio.Block, gain float64) {
	for _, x := range b {
		for i, v := range x {
			y := float32(float64(v) * gain)
			if y-y != 0 {
				y = 0
			}
			x[i] = y
		}
	}
}
