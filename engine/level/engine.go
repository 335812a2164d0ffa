package level

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"

	"evenshelf/engine/media"
	"evenshelf/engine/profile"
)

// mostRenders bounds the search for the target with deep limiting or an encoder that changes the level.
// Going back to the best of them is one rendering more.
const mostRenders = 5

// Level measures source, plans, renders into the file scratch, reads that file back and judges it. The
// outcome tells everything; an error means something that may heal (a full disk, a cancelled context)
// and leaves no scratch behind. A source that cannot be read is an outcome with state Failed.
func (e *Engine) Level(ctx context.Context, source string, t Task, scratch string) (o Outcome, err error) {
	p := t.Profile
	defer func() {
		if err != nil || o.After == nil {
			o.Extension = ""
			os.Remove(scratch)
		}
	}()
	how := Options{Mono: p.Mono}
	before, err := e.Analyse(ctx, source, how)
	if cause := context.Cause(ctx); cause != nil {
		return Outcome{}, cause
	}
	if errors.Is(err, media.ErrKilled) {
		return Outcome{}, err
	}
	if err != nil {
		return failed(nil, Reason(err, source)), nil
	}
	plan, err := MakePlan(p, before)
	if err != nil {
		return failed(before, err.Error()), nil
	}

	o = Outcome{Before: before}
	if plan.Untouched {
		o.Extension = filepath.Ext(source)
		err = e.copyUntouched(ctx, source, scratch, how, &o)
	} else {
		o.Extension, plan, err = e.renderToTarget(ctx, source, p, plan, scratch, &o)
	}
	if errors.Is(err, media.ErrUnsupported) {
		return failed(before, Reason(err, source)), nil
	}
	if err != nil {
		return Outcome{}, err
	}
	o.Plan = &plan
	o.Verdict = Judge(p, before, o.After, plan)
	return o, nil
}

func failed(before *Analysis, reason string) Outcome {
	return Outcome{Before: before, Verdict: Verdict{State: Failed, Reason: reason}}
}

// Reason is an error about a source in words that stand beside its name and need not repeat it. They are shown
// also to people who need not know in which folder its shelf is.
func Reason(err error, source string) string {
	return strings.ReplaceAll(strings.TrimPrefix(err.Error(), source+": "), source, filepath.Base(source))
}

// renderToTarget renders until no rendering comes closer to the target, and delivers the one that came
// closest: a lossy encoder may answer the smallest change of gain with a jump.
func (e *Engine) renderToTarget(ctx context.Context, source string, p profile.Profile, plan Plan, scratch string, o *Outcome) (string, Plan, error) {
	spec := e.Media.SpecFor(o.Before.Info)
	spec.TagsFrom = source
	how := Options{Mono: p.Mono}
	if plan.Limit {
		var err error
		if plan, err = e.approach(ctx, source, p, plan, o.Before); err != nil {
			return "", plan, err
		}
	}
	best, latest := plan, plan
	for more := true; more && o.Renders < mostRenders; {
		after, err := e.renderFile(ctx, source, plan, spec, scratch, how)
		if err != nil {
			return "", plan, err
		}
		o.Renders++
		latest = plan
		if o.After == nil || closer(p, after, o.After) {
			best, o.After = plan, after
		}
		plan, more = plan.again(p, o.Before, after)
	}
	if best != latest {
		after, err := e.renderFile(ctx, source, best, spec, scratch, how)
		if err != nil {
			return "", best, err
		}
		o.Renders++
		o.After = after
	}
	return spec.Extension, best, nil
}

// renderFile renders into the file scratch and measures what is there then.
func (e *Engine) renderFile(ctx context.Context, source string, plan Plan, spec media.Spec, scratch string, how Options) (*Analysis, error) {
	src, err := e.Media.Open(ctx, source)
	if err != nil {
		return nil, err
	}
	defer src.Close()
	sink, err := e.Media.Create(ctx, scratch, spec)
	if err != nil {
		return nil, err
	}
	err = Render(ctx, src, plan, sink)
	if e := sink.Close(); err == nil { // else a sink that failed only says so again
		err = e
	}
	if err != nil {
		return nil, err
	}
	after, err := e.Analyse(ctx, scratch, how)
	if err != nil {
		return nil, fmt.Errorf("reading the copy back: %w", err)
	}
	return after, nil
}

// copyUntouched copies source byte for byte and measures the copy, so that what is delivered is what
// was measured here too.
func (e *Engine) copyUntouched(ctx context.Context, source, scratch string, how Options, o *Outcome) (err error) {
	in, err := os.Open(source)
	if err != nil {
		return err
	}
	defer in.Close()
	out, err := os.Create(scratch)
	if err != nil {
		return err
	}
	_, err = io.Copy(out, in)
	if err = errors.Join(err, out.Sync(), out.Close()); err != nil {
		return err
	}
	o.After, err = e.Analyse(ctx, scratch, how)
	return err
}
