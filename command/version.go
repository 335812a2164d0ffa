package command

import (
	"fmt"
	"net/http"
	"runtime"

	"evenshelf/engine/level"
)

type versionCmd struct {
	Server string `help:"Ask this running server how it is instead; exit code 0 if it is well." placeholder:"URL"`
}

func (c *versionCmd) Run(a *app) error {
	if c.Server != "" {
		var health struct{ Status, Version string }
		if err := (client{c.Server}).call(a.ctx, http.MethodGet, "/healthz", &health); err != nil {
			return err
		}
		fmt.Fprintf(a.stdout, "evenshelf %s at %s: %s\n", health.Version, c.Server, health.Status)
		return nil
	}
	e, err := a.engine()
	if err != nil {
		return err
	}
	codec := "no ffmpeg found: WAV, FLAC and MP3 can be read, WAV and FLAC written"
	if path := e.Media.FFmpeg(); path != "" {
		codec = "codecs by " + path
	}
	fmt.Fprintf(a.stdout, "evenshelf %s, engine %s, %s, %s\n", Version, level.Version, runtime.Version(), codec)
	return nil
}
