package level

import (
	"cmp"
	"context"
	"fmt"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
	"evenshelf/engine/meter"
)

const (
	// mostRenders bounds how often a file is made, with an encoder that changes the level. Going back to the
	// best of them is one rendering more.
	mostRenders = 5
	// anotherRender is the miss, LU, from which on another file is worth while. What a lossy encoder
	// answers to a smaller change is as likely to be a jump away as a step closer.
	anotherRender      = 0.03
	anotherLossyRender = 0.1
	// lowerStill is how much further than a lossy copy's peak is over its ceiling the next one is made, dB: the encoder
	// will not do the same again.
	lowerStill = 0.1
)

// turn is one recording's way through the pipeline, after it has been measured.
type turn struct {
	engine   *Engine
	source   string
	task     Task
	before   *Analysis
	plan     Plan
	foreseen rendering // of the plan
	most     audio.DB  // the gain with which the ceiling takes off as much as it may
	made     Work      // by the rendering that was delivered
}

// how says how the source is opened and measured; once that was done, by the track that it was done for.
func (j *turn) how() Options {
	o := OptionsFor(j.task.Profile)
	if j.before != nil {
		o.Track = j.before.Info.Track
	}
	return o
}

// tell puts what was planned, foreseen and done into the outcome, and the verdict on how it came out.
func (j *turn) tell(o *Outcome, r rendering) {
	o.Plan, o.Foreseen = &j.plan, &j.foreseen.Reading
	if j.plan.Untouched {
		o.Foreseen = &j.before.Reading
	} else {
		o.Treatment = treatmentOf(j.before, r)
	}
	o.Verdict = judge(j.task.Profile, j.before, j.plan, r, o.Treatment)
}

// deliver renders until no rendering comes closer to the aim, and leaves the one that came closest in
// scratch: a lossy encoder may answer the smallest change of gain with a jump. It returns the extension.
func (j *turn) deliver(ctx context.Context, scratch string, o *Outcome) (string, error) {
	spec := j.engine.Media.SpecFor(j.before.Info, wish(j.task.Profile))
	spec.TagsFrom = cmp.Or(j.task.TagsFrom, j.source)
	spec.History = fmt.Sprintf("Evenshelf engine %s; %s", Version, j.task.Profile.Name)
	if err := j.foresee(ctx); err != nil {
		return "", err
	}
	near := audio.LU(anotherRender)
	if spec.BitDepth == 0 {
		near = anotherLossyRender
	}
	plan, rendered := j.plan, Plan{}
	for more := true; more && o.Renders < mostRenders; {
		after, work, err := j.render(ctx, plan, spec, scratch)
		if err != nil {
			return "", err
		}
		o.Renders++
		rendered = plan
		if o.After == nil || j.closer(after, o.After) {
			j.plan, j.made, o.After = plan, work, after
		}
		plan, more = j.again(plan, after, near)
	}
	if rendered != j.plan {
		after, work, err := j.render(ctx, j.plan, spec, scratch)
		if err != nil {
			return "", err
		}
		o.Renders++
		j.made, o.After = work, after
	}
	return spec.ExtensionFor(j.source), media.Stamp(scratch, media.Loudness{
		Integrated: o.After.Integrated, Range: o.After.Range, TruePeak: o.After.TruePeak,
		MaxMomentary: o.After.MaxMomentary, MaxShort: o.After.MaxShortTerm,
	})
}

// render renders into the file scratch and measures what is there then.
func (j *turn) render(ctx context.Context, plan Plan, spec media.Spec, scratch string) (*Analysis, Work, error) {
	src, err := j.engine.open(ctx, j.source, j.how())
	if err != nil {
		return nil, Work{}, err
	}
	defer src.Close()
	sink, err := j.engine.Media.Create(ctx, scratch, spec)
	if err != nil {
		return nil, Work{}, err
	}
	work, err := Render(ctx, src, plan, sink)
	if e := sink.Close(); err == nil { // else a sink that failed only says so again
		err = e
	}
	if err != nil {
		return nil, Work{}, err
	}
	how := j.how()
	how.Track = spec.Film.Delivered()
	after, err := j.engine.Analyse(ctx, scratch, how)
	if err != nil {
		return nil, Work{}, fmt.Errorf("reading the copy back: %w", err)
	}
	return after, work, nil
}

// readBack is a delivered file as a rendering.
func (j *turn) readBack(after *Analysis) rendering {
	return j.rendering(after.Reading, after.Timeline.Timeline, j.made)
}

// again returns the plan for another rendering, given how the last one came out; ok is false if another
// would not come closer. Encoders move loudness and peaks, and even a plain gain can miss: it lifts quiet
// passages over the −70 LUFS gate.
func (j *turn) again(plan Plan, after *Analysis, near audio.LU) (next Plan, ok bool) {
	next = plan
	mayLimit := j.task.Profile.Limiter.Most > 0
	if over := audio.DB(after.TruePeak - j.task.Profile.Ceiling); over > peakAim {
		next.Ceiling = audio.DBTP(stored(audio.DB(plan.Ceiling) - over - lowerStill))
		next.Limit = mayLimit
	}
	// How much limiting there may be goes by the profile's ceiling: what an encoder needs lower is not held against it.
	most := j.most
	if !mayLimit {
		most += audio.DB(next.Ceiling - j.task.Profile.Ceiling)
	}
	next.Gain = stored(min(plan.Gain+audio.DB(plan.Aim-j.readBack(after).anchored), most))
	if plan.still() {
		next.Limit = mayLimit && next.Gain > audio.DB(next.Ceiling-j.before.TruePeak)
	}
	next.Reason = next.words(j.task.Profile)
	return next, abs(audio.LU(next.Gain-plan.Gain)) > near || next.Ceiling != plan.Ceiling
}

// closer reports whether one rendering came out closer to the profile than another: first by how far its
// peaks pass the ceiling, then by its distance from the aim.
func (j *turn) closer(a, b *Analysis) bool {
	over := func(x *Analysis) audio.DB { return max(0, audio.DB(x.TruePeak-j.task.Profile.Ceiling)-peakAim) }
	if over(a) != over(b) {
		return over(a) < over(b)
	}
	off := func(x *Analysis) audio.LU { return abs(j.plan.Aim.Sub(j.readBack(x).anchored)) }
	return off(a) < off(b)
}

// predict returns how a plan's rendering will come out before it is encoded. It costs a decoding.
func (j *turn) predict(ctx context.Context, plan Plan) (rendering, error) {
	src, err := j.engine.open(ctx, j.source, j.how())
	if err != nil {
		return rendering{}, err
	}
	defer src.Close()
	m, err := meter.New(src.Format(), j.task.Profile.Mono)
	if err != nil {
		return rendering{}, err
	}
	work, err := Render(ctx, src, plan, metered{m})
	if err != nil {
		return rendering{}, err
	}
	reading, timeline := m.Finish()
	return j.rendering(reading, timeline, work), nil
}

// metered is a sink that only measures.
type metered struct{ *meter.Meter }

func (m metered) WriteBlock(b audio.Block) error { m.Write(b); return nil }
func (m metered) Close() error                   { return nil }
