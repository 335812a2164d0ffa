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
)

// Engine does the work on files it is handed. It is safe for concurrent use.
type Engine struct {
	Media *media.Toolbox
}

// Analyse reads the recording at path to its end and measures it. A recording that ends early or that
// the decoder complains about is measured as far as it goes and has a serious fault that says so; one
// that cannot be read at all is an error that names the file and the reason.
func (e *Engine) Analyse(ctx context.Context, path string) (*Analysis, error) {
	src, err := e.Media.Open(ctx, path)
	if err != nil {
		return nil, err
	}
	defer src.Close()
	return analyse(ctx, path, src)
}

func analyse(ctx context.Context, path string, src media.Reader) (*Analysis, error) {
	m, err := meter.New(src.Format())
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	detector := faults.New(src.Format())
	frames, err := audio.Each(src, func(b audio.Block) error {
		m.Write(b)
		detector.Write(b)
		return context.Cause(ctx)
	})
	if cause := context.Cause(ctx); cause != nil {
		return nil, cause
	}
	damage, err := damageOf(src, frames, err)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if frames == 0 {
		return nil, fmt.Errorf("%s: there is no sound in it", path)
	}

	a := &Analysis{
		FormatName: src.Info().FormatName(),
		Decoder:    src.Info().Decoder,
		Engine:     Version,
		Info:       src.Info(),
	}
	a.Reading, a.Timeline = m.Finish()
	a.Faults = append(damage, detector.Finish()...)
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
