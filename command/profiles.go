package command

import (
	"encoding/json"
	"fmt"

	"evenshelf/engine/profile"
)

type profilesCmd struct {
	Name string `arg:"" optional:"" help:"Show this profile in words."`
	JSON bool   `name:"json" help:"Print JSON instead."`
}

func (c *profilesCmd) Run(a *app) error {
	list := profile.Builtin()
	if c.Name != "" {
		p, err := profile.Named(c.Name)
		if err != nil {
			return usageError(err.Error())
		}
		list = []profile.Profile{p}
	}
	for _, p := range list {
		switch {
		case c.JSON:
			if err := json.NewEncoder(a.stdout).Encode(p); err != nil {
				return err
			}
		case c.Name == "":
			fmt.Fprintf(a.stdout, "%-12s %s\n", p.Name, p.Summary)
		default:
			fmt.Fprint(a.stdout, describe(p))
		}
	}
	return nil
}

func describe(p profile.Profile) string {
	s := fmt.Sprintf("%s (version %s)\n%s\n\n", p.Name, p.Version(), p.Summary)
	s += fmt.Sprintf("  brings each recording to   %s LUFS integrated, within %.1f LU\n", figure(float64(p.Target), 0), p.Tolerance)
	s += fmt.Sprintf("  a single channel counts    %s\n", p.Mono.Words())
	s += fmt.Sprintf("  true peak at the most      %s dBTP\n", figure(float64(p.Ceiling), 0))
	if p.Limiter.Most == 0 {
		s += "  peaks                      not touched: the gain stops where they meet the ceiling\n"
	} else {
		s += fmt.Sprintf("  peaks                      held by up to %.0f dB; a recording that needs more is held for you\n", p.Limiter.Most)
	}
	s += fmt.Sprintf("  lift at the most           %.0f dB; past it the copy is held, since its noise is lifted too\n", p.Harm.Lift)
	return s + "\nLevelling does not replace a transmitter's own protection; the licence and local rules stand.\n"
}
