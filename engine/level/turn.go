package level

import (
	"context"
	"fmt"
	"strings"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
	"evenshelf/engine/meter"
)

const (
	// mostRenders bounds how often a file is made, with an encoder that changes the level.
	mostRenders = 3
	// anotherRender is the miss, LU, from which on another file is worth while. What a lossy encoder answers to a small
	// change is as likely to be a jump away as a step closer, and costs as much as all the rest: there it is the share
	// lossyShare of the profile's tolerance.
	anotherRender = 0.03
	lossyShare    = 0.5
	// lowerStill is how much further than a lossy copy's peak is over its ceiling the next one is made, dB: the encoder
	// will not do the same again. After that it is lowestStill.
	lowerStill  = 0.1
	lowestStill = 0.3
)

// turn is one recording's way through the pipeline, after it has been measured.
type turn struct {
	engine   *Engine
	source   string
	task     Task
	before   *Analysis
	sound    *decoded // of the source; nil if it has to be decoded again
	spec     media.Spec
	encoder  Encoder
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

// copied says how a copy is measured whose levelled sound is in a track.
func (j *turn) copied(track int) Options {
	o := j.how()
	o.Track, o.Course = track, &j.before.Timeline.Course
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
	if note := j.otherFormat(); note != "" {
		o.Verdict.Reason = strings.TrimPrefix(o.Verdict.Reason+"; "+note, "; ")
	}
}

// otherFormat says why the copy is not in the format that the source has or that was asked for; "" if it is.
func (j *turn) otherFormat() string {
	if j.plan.Untouched || j.spec.Note == "" {
		return ""
	}
	return fmt.Sprintf("delivered as %s (%s)", j.spec.FormatName(), j.spec.Note)
}

// deliver renders until a copy is near enough, and leaves the one that came closest in scratch: a lossy encoder may
// answer the smallest change of gain with a jump. It returns the extension.
func (j *turn) deliver(ctx context.Context, scratch string, o *Outcome) (string, error) {
	if err := j.foresee(ctx); err != nil {
		return "", err
	}
	var best aside
	defer best.close()
	plan := j.plan
	for more := true; more; {
		after, work, err := j.render(ctx, plan, scratch)
		if err != nil {
			return "", err
		}
		o.Renders++
		closest := o.After == nil || j.closer(after, o.After)
		if closest {
			j.plan, j.made, o.After = plan, work, after
		}
		plan, more = j.again(plan, after, o.Renders)
		more = more && o.Renders < mostRenders
		switch {
		case closest && more:
			err = best.put(scratch)
		case !closest && !more:
			err = best.restore(scratch)
		}
		if err != nil {
			return "", err
		}
	}
	return j.spec.ExtensionFor(j.source), media.Stamp(scratch, media.Loudness{
		Integrated: o.After.Integrated, Range: o.After.Range, TruePeak: o.After.TruePeak,
		MaxMomentary: o.After.MaxMomentary, MaxShort: o.After.MaxShortTerm,
	})
}

// open returns the source's sound from its start, and what closes it.
func (j *turn) open(ctx context.Context) (audio.Source, func() error, error) {
	if j.sound.whole() {
		return j.sound.source(), func() error { return nil }, nil
	}
	src, err := j.engine.open(ctx, j.source, j.how())
	if err != nil {
		return nil, nil, err
	}
	return src, src.Close, nil
}

// render renders into the file scratch and measures what is there then.
func (j *turn) render(ctx context.Context, plan Plan, scratch string) (*Analysis, Work, error) {
	src, done, err := j.open(ctx)
	if err != nil {
		return nil, Work{}, err
	}
	defer done()
	sink, err := j.engine.Media.Create(ctx, scratch, j.spec)
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
	after, err := j.engine.Analyse(ctx, scratch, j.copied(j.spec.Film.Delivered()))
	if err != nil {
		return nil, Work{}, fmt.Errorf("reading the copy back: %w", err)
	}
	return after, work, nil
}

// readBack is a delivered file as a rendering.
func (j *turn) readBack(after *Analysis) rendering {
	return j.rendering(after.Reading, after.Timeline.Timeline, j.made)
}

// mayLimit reports whether the profile lets the ceiling take anything off.
func (j *turn) mayLimit() bool { return j.task.Profile.Limiter.Most > 0 }

// near is how far off the aim a copy may be without being made again.
func (j *turn) near() audio.LU {
	if j.spec.BitDepth == 0 {
		return lossyShare * j.task.Profile.Tolerance
	}
	return anotherRender
}

// again returns the plan for another rendering, given how the last one came out, after so many; ok is false if another would
// not come closer. Encoders move loudness and peaks, and even a plain gain can miss: it lifts quiet
// passages over the −70 LUFS gate.
func (j *turn) again(plan Plan, after *Analysis, renders int) (next Plan, ok bool) {
	next = plan
	if over := audio.DB(after.TruePeak - j.task.Profile.Ceiling); over > peakAim {
		still := audio.DB(lowerStill)
		if renders > 1 {
			still = lowestStill
		}
		held := plan.Ceiling
		if plan.still() && !plan.Limit {
			held = min(held, j.before.TruePeak+audio.DBTP(plan.Gain))
		}
		next.Ceiling = audio.DBTP(stored(audio.DB(held) - over - still))
		next.Limit = j.mayLimit()
	}
	most := j.most
	if !j.mayLimit() {
		most += audio.DB(next.Ceiling-j.task.Profile.Ceiling) + j.encoder.raises(false, j.task.Shared != nil)
	}
	next.Gain = stored(min(plan.Gain+audio.DB(plan.Aim-j.readBack(after).anchored), most))
	if plan.still() {
		next.Limit = j.mayLimit() && next.Gain > audio.DB(next.Ceiling-j.before.TruePeak)
	}
	next.Reason = next.words(j.task.Profile)
	return next, abs(audio.LU(next.Gain-plan.Gain)) > j.near() || next.Ceiling != plan.Ceiling
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

// predict returns how a plan's rendering will come out, by what is known of the encoder. It costs a pass over the sound.
func (j *turn) predict(ctx context.Context, plan Plan) (rendering, error) {
	src, done, err := j.open(ctx)
	if err != nil {
		return rendering{}, err
	}
	defer done()
	f, mono := src.Format(), j.task.Profile.Mono
	if plan.alike { // of which one counts as both
		f.Layout, mono = audio.Mono, audio.TwoLoudspeakers
	}
	m, err := meter.New(f, mono)
	if err != nil {
		return rendering{}, err
	}
	work, err := Render(ctx, src, plan, metered{m, f.Layout.Channels})
	if err != nil {
		return rendering{}, err
	}
	reading, timeline := m.Finish()
	reading.Channels, reading.Layout, reading.MonoRule = j.before.Channels, j.before.Layout, j.before.MonoRule
	reading, timeline = louder(reading, timeline, j.encoder.Gain)
	return j.rendering(reading, timeline, work), nil
}

// metered is a sink that only measures, the first so many channels.
type metered struct {
	*meter.Meter
	channels int
}

func (m metered) WriteBlock(b audio.Block) error { m.Write(b[:m.channels]); return nil }
func (m metered) Close() error                   { return nil }
