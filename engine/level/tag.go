package level

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"syscall"

	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/media"
	"evenshelf/engine/tags"
)

// rightAlready is the reason of a tags run that leaves a file as it is.
const rightAlready = "its gain tags are right already"

// Tag measures source and writes a copy of it into the file scratch in which the open gain tags say what was measured:
// the recording's own loudness, and its group's where the task has one. Nothing else changes: the copy is read back, and
// its sound has to be the same to the last sample, or the outcome is failed and there is no copy. The outcome has no
// After if there is nothing to write: the tags are right, or the format has none. Errors as for Level.
func (e *Engine) Tag(ctx context.Context, source string, t Task, scratch string) (o Outcome, err error) {
	return e.tag(ctx, source, t, scratch, e.Media.Retag)
}

func (e *Engine) tag(ctx context.Context, source string, t Task, scratch string,
	retag func(ctx context.Context, source, path string, g tags.Gains) error) (o Outcome, err error) {
	defer func() {
		if err != nil || o.After == nil {
			o.Extension = ""
			os.Remove(scratch)
		}
	}()
	before, _, o, err := e.measured(ctx, source, t, false)
	if before == nil || err != nil {
		return o, err
	}
	if err := hasLoudness(before); err != nil {
		return failed(before, err.Error()), nil
	}
	if i := slices.IndexFunc(before.Faults, isDamage); i >= 0 {
		return failed(before, before.Faults[i].Words+": what was read is not the whole of it"), nil
	}
	gains := gainsOf(before, t.Shared)
	carried, err := e.Media.Tags(ctx, source)
	if cause := context.Cause(ctx); cause != nil {
		return Outcome{}, cause
	}
	if err == nil && saysExactly(carried, gains, before.Info) {
		o.Verdict = Verdict{State: Done, Reason: rightAlready}
		return o, nil
	}
	err = retag(ctx, source, scratch, gains)
	var none media.NoGainTags
	switch {
	case errors.As(err, &none): // as those of a mixed shelf; that is no failure of theirs
		o.Verdict = Verdict{State: Done, Reason: "left as it is: there are no gain tags in " + containerName(none.Container)}
		return o, nil
	case err != nil && (ctx.Err() != nil || errors.As(err, new(syscall.Errno))): // the machine's, and may heal
		return Outcome{}, err
	case err != nil:
		return failed(before, Reason(err, source)), nil
	}
	after, err := e.Analyse(ctx, scratch, OptionsFor(t.Profile))
	if cause := context.Cause(ctx); cause != nil {
		return Outcome{}, cause
	}
	switch {
	case errors.Is(err, media.ErrKilled):
		return Outcome{}, err
	case err != nil:
		return failed(before, "the copy with new tags cannot be read back: "+Reason(err, scratch)), nil
	case after.AudioHash != before.AudioHash:
		return failed(before, "the sound of the copy with new tags is not the same"), nil
	}
	o.After, o.Extension = after, filepath.Ext(source)
	o.Verdict = Verdict{State: Done, Reason: tagged(gains)}
	return o, nil
}

// containerName is how people call a container that has no gain tags.
func containerName(container string) string {
	switch container {
	case "matroska":
		return "Matroska"
	case "webm":
		return "WebM"
	case "mpegts":
		return "MPEG transport streams"
	}
	return strings.ToUpper(container)
}

// Album reads which album a file is from; its title is "" if it names none. Errors name the file.
func (e *Engine) Album(ctx context.Context, path string) (media.Album, error) {
	return e.Media.Album(ctx, path)
}

// isDamage reports whether a fault is of the file rather than of the sound in it.
func isDamage(f faults.Fault) bool { return f.Code == "truncated" || f.Code == "damaged" }

// gainsOf are the gain tags of a recording. A group without a loudness has none.
func gainsOf(a *Analysis, shared *Shared) tags.Gains {
	g := tags.Gains{Track: tags.Loudness{Integrated: a.Integrated, Peak: a.TruePeak}}
	if shared != nil && audio.Defined(shared.Integrated) && audio.Defined(shared.TruePeak) {
		g.Album = &tags.Loudness{Integrated: shared.Integrated, Peak: shared.TruePeak}
	}
	return g
}

// saysExactly reports whether the gain tags among those a file carries are the given ones and no others.
func saysExactly(carried map[string]string, g tags.Gains, info media.Info) bool {
	want := g.ReplayGain()
	if info.Codec == "opus" {
		want = g.R128()
	}
	for _, pair := range want {
		if carried[strings.ToLower(pair[0])] != pair[1] {
			return false
		}
	}
	gain := 0
	for name := range carried {
		if tags.IsGain(name) {
			gain++
		}
	}
	return gain == len(want)
}

// tagged says what was written.
func tagged(g tags.Gains) string {
	words := fmt.Sprintf("gain tags written: %s LUFS", audio.Number(float64(g.Track.Integrated), 1))
	if g.Album != nil {
		words += fmt.Sprintf(", %s LUFS with its group", audio.Number(float64(g.Album.Integrated), 1))
	}
	return words
}
