package level

import (
	"context"

	"evenshelf/engine/audio"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
)

// closeEnough ends the search for the gain, LU.
const closeEnough = 0.02

// approach finds the gain with which the ceiling's work still leaves the target loudness, by rendering into
// a meter: each try costs a decoding, but no encoding. The secant's slope is bounded, since the loudness of
// limited sound rises by less than its gain, but never falls.
func (e *Engine) approach(ctx context.Context, source string, p profile.Profile, plan Plan, before *Analysis) (Plan, error) {
	most := headroom(p, before) + p.Limiter.Most
	slope, lastGain, last := 0.9, plan.Gain, audio.LUFS(audio.Undefined)
	for range mostRenders {
		now, err := e.predict(ctx, source, plan, p.Mono)
		if err != nil {
			return plan, err
		}
		off := p.Target - now.Integrated
		if !(abs(off) > closeEnough) || off > 0 && plan.Gain == most {
			break
		}
		if audio.Defined(last) && plan.Gain != lastGain {
			slope = min(max(float64(now.Integrated-last)/float64(plan.Gain-lastGain), 0.25), 1.5)
		}
		lastGain, last = plan.Gain, now.Integrated
		plan.Gain = min(plan.Gain+audio.DB(float64(off)/slope), most)
	}
	plan.Reason = plan.words(p, headroom(p, before))
	return plan, nil
}

// predict returns the reading that a plan's rendering will have before it is encoded.
func (e *Engine) predict(ctx context.Context, source string, plan Plan, mono audio.MonoRule) (meter.Reading, error) {
	src, err := e.Media.Open(ctx, source)
	if err != nil {
		return meter.Reading{}, err
	}
	defer src.Close()
	m, err := meter.New(src.Format(), mono)
	if err != nil {
		return meter.Reading{}, err
	}
	if err := Render(ctx, src, plan, metered{m}); err != nil {
		return meter.Reading{}, err
	}
	r, _ := m.Finish()
	return r, nil
}

// metered is a sink that only measures.
type metered struct{ *meter.Meter }

func (m metered) WriteBlock(b audio.Block) error { m.Write(b); return nil }
func (m metered) Close() error                   { return nil }
