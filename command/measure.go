package command

import (
	"context"
	"encoding/json"
	"fmt"

	"evenshelf/engine/faults"
	"evenshelf/engine/level"
)

type measureCmd struct {
	JSON  bool     `name:"json" help:"Print one JSON object a line instead."`
	Paths []string `arg:"" name:"path" help:"Recordings, or folders of recordings."`
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
		fields["faults"] = []faults.Fault{}
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
		m := measured{Path: in.path, Error: in.err}
		if in.err == nil {
			m.Analysis, m.Error = e.Analyse(ctx, in.path)
		}
		return m
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

func (c *measureCmd) print(a *app, m measured) {
	switch {
	case c.JSON:
		json.NewEncoder(a.stdout).Encode(m)
	case m.Error != nil:
		fmt.Fprintf(a.stdout, "could not be read: %s\n", printable(m.Error.Error()))
	default:
		fmt.Fprintf(a.stdout, "%s  %s\n", summary(m.Analysis), printable(m.Path))
		for _, f := range m.Faults {
			fmt.Fprintf(a.stdout, "      %s: %s\n", f.Severity, f.Words)
		}
	}
}
