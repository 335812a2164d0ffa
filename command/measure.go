package command

import (
	"context"
	"encoding/json"
	"fmt"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
)

type measureCmd struct {
	JSON         bool           `name:"json" xor:"form" help:"Print one JSON object a line instead."`
	Details      bool           `xor:"form" help:"Print every figure with its name and unit instead."`
	LoudnessOnly bool           `help:"Loudness and peaks alone: no faults, no speech; faster."`
	Mono         audio.MonoRule `enum:"one-channel,two-loudspeakers" default:"one-channel" placeholder:"RULE" help:"How a recording with a single channel is counted: one-channel, as one loudspeaker (BS.1770), or two-loudspeakers, as two play it, 3.01 LU more (default: ${default})."`
	Paths        []string       `arg:"" name:"path" help:"Recordings, or folders of recordings."`
}

// measured is a file's reading as JSON. Every field of a reading is there; those that are not known are null.
type measured struct {
	Path string
	*level.Analysis
	Error error
}

func (m measured) MarshalJSON() ([]byte, error) {
	fields := map[string]any{}
	a := m.Analysis
	if a == nil {
		a = &level.Analysis{}
	}
	b, err := json.Marshal(a)
	if err != nil {
		return nil, err
	}
	if err := json.Unmarshal(b, &fields); err != nil {
		return nil, err
	}
	if m.Analysis == nil {
		for k := range fields {
			fields[k] = nil
		}
	}
	fields["path"], fields["error"] = m.Path, nil
	if m.Error != nil {
		fields["error"] = m.Error.Error()
	}
	return json.Marshal(fields)
}

func (c *measureCmd) Run(a *app) error {
	e, files, err := a.recordings(c.Paths)
	if err != nil {
		return err
	}
	unread := 0
	err = inOrder(a.ctx, a.workers(), files, func(ctx context.Context, in input) measured {
		return c.measure(ctx, e, in)
	}, func(_ input, m measured) {
		if m.Error != nil {
			unread++
		}
		c.print(a, m)
	})
	if err != nil {
		return err
	}
	if unread > 0 {
		fmt.Fprintf(a.stderr, "evenshelf: %d of %d could not be read\n", unread, len(files))
		return statusError(exitSome)
	}
	return nil
}

func (c *measureCmd) measure(ctx context.Context, e *level.Engine, in input) measured {
	m := measured{Path: in.path, Error: in.err}
	if m.Error == nil {
		m.Analysis, m.Error = e.Analyse(ctx, in.path, level.Options{Mono: c.Mono, LoudnessOnly: c.LoudnessOnly})
	}
	if m.Error == nil && c.LoudnessOnly && len(m.Faults) == 0 {
		m.Faults = nil // not looked for, which is not the same as none found; damage met while decoding is told
	}
	return m
}

func (c *measureCmd) print(a *app, m measured) {
	switch {
	case c.JSON:
		json.NewEncoder(a.stdout).Encode(m)
	case m.Error != nil:
		fmt.Fprintf(a.stdout, "could not be read: %s\n", printable(m.Error.Error()))
	case c.Details:
		fmt.Fprintf(a.stdout, "%s\n%s\n", printable(m.Path), details(m.Analysis))
	default:
		fmt.Fprintf(a.stdout, "%s  %s%s\n", summary(m.Analysis), printable(m.Path), spoken(m.Analysis))
		for _, f := range m.Faults {
			fmt.Fprintf(a.stdout, "      %s: %s\n", f.Severity, f.Words)
		}
	}
}

// spoken tells how much of a recording is speech and how loud that is, to follow its name; "" without speech.
// Less than a second of it has no loudness.
func spoken(a *level.Analysis) string {
	switch {
	case !(a.SpeechTime > 0):
		return ""
	case !audio.Defined(a.SpeechLoudness) && a.SpeechTime < a.ActiveTime/2: // more likely a mistake than speech
		return ""
	case !audio.Defined(a.SpeechLoudness):
		return fmt.Sprintf("  (speech: %s %%)", a.Share())
	}
	return fmt.Sprintf("  (speech: %s %%, %s LUFS)", a.Share(), figure(float64(a.SpeechLoudness), 0))
}
