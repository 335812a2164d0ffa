package level

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"evenshelf/engine/media"
)

// Level measures source, plans, renders into the file scratch, reads that file back and judges it. The
// outcome tells everything; an error means something that may heal (a full disk, a cancelled context)
// and leaves no scratch behind. A source that cannot be read is an outcome with state Failed.
func (e *Engine) Level(ctx context.Context, source string, t Task, scratch string) (o Outcome, err error) {
	defer func() {
		if err != nil || o.After == nil {
			o.Extension = ""
			os.Remove(scratch)
		}
	}()
	j, o, err := e.begin(ctx, source, t)
	if j == nil || err != nil {
		return o, err
	}
	defer j.sound.close()
	if j.plan.Untouched {
		o.Extension = filepath.Ext(source)
		o.After, err = e.copyUntouched(ctx, source, scratch, j.copied(j.before.Info.Track))
	} else {
		o.Extension, err = j.deliver(ctx, scratch, &o)
	}
	if errors.Is(err, media.ErrUnsupported) {
		return failed(j.before, Reason(err, source)), nil
	}
	if err != nil {
		return Outcome{}, err
	}
	r := j.readBack(o.After)
	r.copies = o.Renders
	j.tell(&o, r)
	return o, nil
}

// Foresee does what Level does without writing anything: the outcome has no After, but the reading that is
// foreseen, and the verdict on that.
func (e *Engine) Foresee(ctx context.Context, source string, t Task) (Outcome, error) {
	j, o, err := e.begin(ctx, source, t)
	if j == nil || err != nil {
		return o, err
	}
	defer j.sound.close()
	if err := j.foresee(ctx); err != nil {
		return Outcome{}, err
	}
	j.tell(&o, j.foreseen)
	return o, nil
}

// begin measures and plans. There is no turn if the recording cannot be levelled; the outcome says why.
func (e *Engine) begin(ctx context.Context, source string, t Task) (*turn, Outcome, error) {
	before, sound, o, err := e.measured(ctx, source, t, true)
	if before == nil || err != nil {
		return nil, o, err
	}
	j := &turn{engine: e, source: source, task: t, before: before, sound: sound}
	j.spec = e.Media.SpecFor(before.Info, wish(t.Profile))
	j.spec.TagsFrom = cmp.Or(t.TagsFrom, source)
	j.spec.History = fmt.Sprintf("Evenshelf engine %s; %s", Version, t.Profile.Name)
	j.encoder = encoderOf(j.spec)
	if j.plan, err = MakePlan(t, before, j.encoder); err != nil {
		sound.close()
		return nil, failed(before, err.Error()), nil
	}
	if j.plan.Untouched {
		sound.close()
	}
	return j, o, nil
}

// measured takes the before reading of a task's recording, and keeps its sound if asked to; no reading if it cannot be
// read: the outcome says why.
func (e *Engine) measured(ctx context.Context, source string, t Task, keep bool) (_ *Analysis, sound *decoded, o Outcome, err error) {
	defer func() {
		if err != nil || o.Before == nil {
			sound.close()
		}
	}()
	before, sound, err := e.analyse(ctx, source, OptionsFor(t.Profile), keep)
	if cause := context.Cause(ctx); cause != nil {
		return nil, sound, Outcome{}, cause
	}
	if errors.Is(err, media.ErrKilled) {
		return nil, sound, Outcome{}, err
	}
	if err != nil {
		return nil, sound, failed(nil, Reason(err, source)), nil
	}
	if t.Known != nil {
		if err := t.Known(before); err != nil {
			return nil, sound, Outcome{}, err
		}
	}
	return before, sound, Outcome{Before: before}, nil
}

func failed(before *Analysis, reason string) Outcome {
	return Outcome{Before: before, Verdict: Verdict{State: Failed, Reason: reason}}
}

// Reason is an error about a source in words that stand beside its name and need not repeat it. They are shown
// also to people who need not know in which folder its shelf is.
func Reason(err error, source string) string {
	return strings.ReplaceAll(strings.TrimPrefix(err.Error(), source+": "), source, filepath.Base(source))
}

// copyUntouched copies source byte for byte and measures the copy, so that what is delivered is what
// was measured here too.
func (e *Engine) copyUntouched(ctx context.Context, source, scratch string, how Options) (*Analysis, error) {
	in, err := os.Open(source)
	if err != nil {
		return nil, err
	}
	defer in.Close()
	if err := copyInto(scratch, in); err != nil {
		return nil, err
	}
	return e.Analyse(ctx, scratch, how)
}
