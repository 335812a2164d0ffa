package command

import (
	"encoding/json"
	"fmt"
	"io"
	"path/filepath"
	"strings"
	"text/tabwriter"

	"evenshelf/engine/profile"
)

// profilesCmd shows what can be levelled with. Without a sub-command it lists the profiles, or shows the one named.
type profilesCmd struct {
	Show    profilesShowCmd    `cmd:"" default:"withargs" help:"List the profiles, or show one in words."`
	Check   profilesCheckCmd   `cmd:"" help:"Check files with profiles, and print all that is wrong with each."`
	Explain profilesExplainCmd `cmd:"" help:"Say what a field of a profile means and what it can be."`
}

type profilesShowCmd struct {
	Name string `arg:"" optional:"" placeholder:"NAME|FILE.toml" help:"Show this profile in words, or the one in this file."`
	JSON bool   `name:"json" xor:"form" help:"Print JSON instead."`
	TOML bool   `name:"toml" xor:"form" help:"Print a file to start a profile of your own from."`
}

func (c *profilesShowCmd) Run(a *app) error {
	if c.Name == "" {
		return c.list(a)
	}
	l, err := a.listed(c.Name)
	if err != nil {
		return err
	}
	switch {
	case c.JSON:
		return json.NewEncoder(a.stdout).Encode(l.Described())
	case c.TOML:
		_, err = a.stdout.Write(l.TOML())
		return err
	}
	return describe(a.stdout, l)
}

func (c *profilesShowCmd) list(a *app) error {
	if c.TOML {
		return usageError("--toml needs the name of a profile")
	}
	set, err := a.profiles()
	if err != nil {
		return err
	}
	t := tabwriter.NewWriter(a.stdout, 0, 0, 2, ' ', 0)
	for _, l := range set.All {
		if c.JSON {
			err = json.NewEncoder(a.stdout).Encode(l.Described())
		} else {
			_, err = fmt.Fprintf(t, "%s\t%s\t%s\n", l.Name, l.Source, l.Summary)
		}
		if err != nil {
			return err
		}
	}
	if err := t.Flush(); err != nil {
		return err
	}
	for _, p := range set.Problems {
		if !filepath.IsAbs(p.File) {
			p.File = filepath.Join(a.ownProfiles(), p.File)
		}
		fmt.Fprintln(a.stderr, "evenshelf:", printable(p.Error()))
	}
	if set.Problems != nil {
		return statusError(exitSome)
	}
	return nil
}

// describe writes a profile in words, a sentence a line.
func describe(w io.Writer, l profile.Listed) error {
	var b strings.Builder
	from := string(l.Source)
	if l.File != "" {
		from += ", " + l.File
	}
	fmt.Fprintf(&b, "%s (%s; version %s)\n%s\n", l.Name, printable(from), l.Version(), l.Summary)
	for _, s := range l.Words() {
		fmt.Fprintf(&b, "\n%s\n", s.Title)
		for _, words := range s.Words {
			fmt.Fprintf(&b, "  %s\n", words)
		}
	}
	_, err := io.WriteString(w, b.String())
	return err
}

type profilesCheckCmd struct {
	Files []string `arg:"" name:"file" help:"Files with a profile each, called NAME.toml."`
}

func (c *profilesCheckCmd) Run(a *app) error {
	wrong := 0
	for _, file := range c.Files {
		p, err := profile.Load(file)
		if err == nil {
			fmt.Fprintf(a.stdout, "%s: fine: profile %s, version %s\n", printable(file), p.Name, p.Version())
			continue
		}
		wrong++
		for line := range strings.SplitSeq(err.Error(), "\n") {
			fmt.Fprintln(a.stdout, printable(line))
		}
	}
	if wrong > 0 {
		fmt.Fprintf(a.stderr, "evenshelf: %d of %d cannot be used; the reasons are above\n", wrong, len(c.Files))
		return statusError(exitSome)
	}
	return nil
}

type profilesExplainCmd struct {
	Field string `arg:"" optional:"" help:"The field, with its table: ride.deadband_db (default: all of them, a line each)."`
}

func (c *profilesExplainCmd) Run(a *app) error {
	t := tabwriter.NewWriter(a.stdout, 0, 0, 2, ' ', 0)
	if c.Field == "" {
		for _, f := range profile.Fields() {
			fmt.Fprintf(t, "%s\t%s\t%s\n", f.Name, f.Allowed(), f.Means)
		}
		return t.Flush()
	}
	f, err := profile.FieldNamed(c.Field)
	if err != nil {
		return usageError(err.Error() + "; 'evenshelf profiles explain' lists them")
	}
	fmt.Fprintf(t, "%s\n%s\n\n", f.Name, f.Means)
	fmt.Fprintf(t, "  can be\t%s\n", f.Allowed())
	for _, w := range f.Words {
		fmt.Fprintf(t, "  \t%s: %s\n", w.Word, w.Means)
	}
	switch usual := f.Usual(); {
	case f.Name == "name":
		return t.Flush()
	case usual == "":
		fmt.Fprintf(t, "  if left out\tas in the profile it is based on; it has to be given if there is none\n")
	default:
		fmt.Fprintf(t, "  if left out\tas in the profile it is based on, else %s\n", usual)
	}
	for _, p := range profile.Builtin() {
		fmt.Fprintf(t, "  in %s\t%s\n", p.Name, f.Value(p))
	}
	return t.Flush()
}
