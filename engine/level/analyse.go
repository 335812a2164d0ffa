package level

import (
	"context"
	"errors"
	"fmt"
	"io"
	"strings"

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
func (e *Engine) Analyse(ctx context.Context, path string, o Options) (*Analysis, error) {
	a, _, err := e.analyse(ctx, path, o, false)
	return a, err
}

// analyse does Analyse's work and, if it is asked to and there is room, keeps the sound it decodes; closing that is the
// caller's, also after an error.
func (e *Engine) analyse(ctx context.Context, path string, o Options, keep bool) (*Analysis, *decoded, error) {
	src, err := e.open(ctx, path, o)
	if err != nil {
		return nil, nil, err
	}
	defer src.Close()
	var sound *decoded
	if keep {
		sound = newDecoded(src)
	}
	a, err := analyse(ctx, src, o, sound)
	if cause := context.Cause(ctx); cause != nil {
		return nil, sound, cause
	}
	if err != nil && !strings.HasPrefix(err.Error(), path+": ") { // what reading met names it already
		err = fmt.Errorf("%s: %w", path, err)
	}
	return a, sound, err
}

// open opens the sound that is to be measured or levelled.
func (e *Engine) open(ctx context.Context, path string, o Options) (media.Reader, error) {
	src, err := e.Media.OpenTrack(ctx, path, o.Track)
	if err != nil || !o.Stereo {
		return src, err
	}
	mix, err := media.Downmix(src)
	if err != nil {
		src.Close()
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return mix, nil
}

// analyse measures what is left of src, and keeps it in sound. Decoding and the meter share one goroutine, everything
// else has another.
func analyse(ctx context.Context, src media.Reader, o Options, sound *decoded) (*Analysis, error) {
	m, err := meter.New(src.Format(), o.Mono)
	if err != nil {
		return nil, err
	}
	var fault *faults.Detector
	var talk *voices
	var others []func(audio.Block)
	if !o.LoudnessOnly {
		fault = faults.New(src.Format())
		others = append(others, fault.Write)
		if o.Course == nil {
			talk = newVoices(src.Format())
			others[0] = func(b audio.Block) { fault.Write(b); talk.write(b) }
		}
	}
	identity := newFingerprint(src.Format())
	frames, err := audio.Spread(src, func(b audio.Block) { m.Write(b); identity.write(b); sound.write(b) }, others...)
	damage, err := damageOf(src, frames, err)
	if err != nil {
		return nil, err
	}
	if frames == 0 {
		return nil, errors.New("there is no sound in it")
	}
	a := new(Unmeasured())
	a.FormatName, a.Decoder, a.Engine, a.Info = src.Info().FormatName(), src.Info().Decoder, Version, src.Info()
	a.Stored = storedAs(a.Info)
	a.Faults = append(damage, unplaced(src.Format().Layout)...)
	a.Reading, a.Timeline.Timeline = m.Finish()
	a.AudioHash, a.alike = identity.sum(), identity.alike()
	if o.LoudnessOnly {
		return a, nil
	}
	var found []faults.Fault
	found, a.Condition = fault.Finish()
	a.Faults = append(a.Faults, found...)
	if talk != nil {
		a.Timeline.Course = talk.finish()
	} else {
		a.Timeline.Course = fitted(*o.Course, len(a.Timeline.Level))
	}
	a.Dialogue = dialogue(a.Timeline, a.Duration)
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
		read := audio.Clock(at)
		if promised := src.Info().Frames; promised > frames {
			read += fmt.Sprintf(" of %s", audio.Clock(src.Format().Seconds(promised)))
		}
		f := faults.Fault{Code: "truncated", Severity: faults.Serious, At: at, Words: "the file breaks off after " + read}
		if text := damageText(src); text != "" { // which may lie anywhere
			f.At, f.Words = 0, fmt.Sprintf("only %s could be read: it breaks off, or is damaged inside (%s)", read, text)
		}
		found = append(found, f)
	default:
		return nil, readErr
	}
	if text := damageText(src); text != "" && len(found) == 0 {
		found = append(found, faults.Fault{Code: "damaged", Severity: faults.Serious, Words: "the decoder found damage: " + text})
	}
	return found, nil
}

// damageText is what the decoder complained about, or "".
func damageText(src media.Reader) string {
	if d, ok := src.(media.Damaged); ok {
		return d.Damage()
	}
	return ""
}

// unplaced finds channels of which nobody knows where they sound.
func unplaced(l audio.Layout) []faults.Fault {
	if l.Channels < 3 || l.Position(0) != 0 {
		return nil
	}
	return []faults.Fault{{Code: "no-positions", Severity: faults.Note,
		Words: "the file does not say which loudspeaker each channel is for: all count alike, a bass channel (LFE) too"}}
}
