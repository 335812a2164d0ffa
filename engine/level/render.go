package level

import (
	"context"
	"errors"
	"io"

	"evenshelf/engine/audio"
	"evenshelf/engine/dynamics"
	"evenshelf/engine/meter"
)

// Render carries a plan out: it reads src to its end and writes the levelled sound to sink, frame for
// frame. A source that breaks off early is rendered as far as it goes. Equal input and plan give equal
// output on any machine. sink is not closed.
func Render(ctx context.Context, src audio.Source, plan Plan, sink audio.Sink) error {
	gain := plan.Gain.Linear()
	var ceiling *dynamics.Ceiling
	if plan.Limit {
		ceiling = dynamics.NewCeiling(src.Format(), plan.Ceiling, dynamics.ForMusic, func() dynamics.PeakReader {
			return meter.NewEnvelope(src.Format().Layout.Channels)
		})
	}
	_, err := audio.Each(src, func(b audio.Block) error {
		amplify(b, gain)
		if ceiling != nil {
			b = ceiling.Process(b)
		}
		return errors.Join(sink.WriteBlock(b), context.Cause(ctx))
	})
	if err != nil && !errors.Is(err, io.ErrUnexpectedEOF) {
		return err
	}
	if ceiling == nil {
		return nil
	}
	for b := ceiling.Flush(); b != nil; b = ceiling.Flush() {
		if err := sink.WriteBlock(b); err != nil {
			return err
		}
	}
	return nil
}

// amplify multiplies every sample of b, in place. What is not a finite number becomes silence, as it was
// to the meter: nobody should have to listen to it.
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
