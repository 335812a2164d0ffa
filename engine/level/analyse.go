package level

import (
	"context"
	"errors"
	"fmt"
	"io"

	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/media"
	"evenshelf/engine/meter"
	"evenshelf/engine/speech"
)

// Engine does the work on files it is handed. It is safe for concurrent use.
type Engine struct {
	Media *media.Toolbox
}

// Analyse reads the recording at path to its end and measures it. A recording that ends early or that
// the decoder complains about is measured as far as it goes and has a serious fault that says so; one
// that cannot be read at all is an error that names the file and the reason.
func (e *Engine) Analyse(ctx context.Context, path string, o Options) (*Analysis, error) {
	src, err := e.Media.Open(ctx, path)
	if err != nil {
		return nil, err
	}
	defer src.Close()
	a, err := analyse(ctx, src, o)
	if cause := context.Cause(ctx); cause != nil {
		return nil, cause
	}
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return a, nil
}

// analyse measures what is left of src. Decoding and the meter share one goroutine, everything else has another.
func analyse(ctx context.Context, src media.Reader, o Options) (*Analysis, error) {
	m, err := meter.New(src.Format(), o.Mono)
	if err != nil {
		return nil, err
	}
	var others []func(audio.Block)
	fault, talk := faults.New(src.Format()), speech.New(src.Format())
	if !o.LoudnessOnly {
		others = append(others, func(b audio.Block) { fault.Write(b); talk.Write(b) })
	}
	frames, err := audio.Spread(src, m.Write, others...)
	damage, err := damageOf(src, frames, err)
	if err != nil {
		return nil, err
	}
	if frames == 0 {
		return nil, errors.New("there is no sound in it")
	}
	a := new(Unmeasured())
	a.FormatName, a.Decoder, a.Engine, a.Info = src.Info().FormatName(), src.Info().Decoder, Version, src.Info()
	a.Faults = damage
	a.Reading, a.Timeline.Timeline = m.Finish()
	if o.LoudnessOnly {
		return a, nil
	}
	var found []faults.Fault
	found, a.Condition = fault.Finish()
	a.Faults = append(a.Faults, found...)
	a.Timeline.Course = talk.Finish()
	a.Dialogue = dialogue(a.Timeline)
	return a, nil
}

// damageOf turns what a decoder says at the end of a recording into faults. Errors that leave nothing
// worth keeping come back as errors.
func damageOf(src media.Reader, frames int64, readErr error) ([]faults.Fault, error) {
	found := []faults.Fault{}
	at := src.Format().Seconds(frames)
	switch {
	case readErr == nil:
	case errors.Is(readErr, io.ErrUnexpectedEOF):
		words := fmt.Sprintf("the file breaks off after %s", audio.Clock(at))
		if promised := src.Info().Frames; promised > frames {
			words += fmt.Sprintf(" of %s", audio.Clock(src.Format().Seconds(promised)))
		}
		found = append(found, faults.Fault{Code: "truncated", Severity: faults.Serious, At: at, Words: words})
	default:
		return nil, readErr
	}
	if d, ok := src.(media.Damaged); ok && len(found) == 0 {
		if text := d.Damage(); text != "" {
			found = append(found, faults.Fault{Code: "damaged", Severity: faults.Serious,
				Words: "the decoder found damage: " + text})
		}
	}
	return found, nil
}
