package command

import (
	"context"
	"fmt"
	"net/http"

	"evenshelf/store"
)

type restoreCmd struct {
	client
	IDs   []int64 `arg:"" optional:"" name:"id" help:"Recordings to restore, by number."`
	OfRun int64   `help:"Restore what this run replaced." placeholder:"NUMBER"`
	All   bool    `help:"Restore everything that is in the attic."`
	List  bool    `help:"Only list what is in the attic."`
}

func (c *restoreCmd) Run(a *app) error {
	ways := 0
	for _, given := range []bool{len(c.IDs) > 0, c.OfRun > 0, c.All, c.List} {
		if given {
			ways++
		}
	}
	if ways != 1 {
		return usageError("say what to restore: numbers of recordings, --of-run NUMBER or --all; --list shows what is in the attic")
	}
	if c.List {
		return c.list(a)
	}
	ids := c.IDs
	if len(ids) == 0 {
		kept, others, err := c.attic(a)
		if err != nil {
			return err
		}
		if len(kept) == 0 {
			fmt.Fprintln(a.stderr, "evenshelf: "+c.nothing(others))
			return statusError(exitSome)
		}
		for _, o := range kept {
			ids = append(ids, o.RecordingID)
		}
	}
	failures := 0
	for _, id := range ids {
		if a.ctx.Err() != nil {
			return context.Cause(a.ctx)
		}
		var r store.Recording
		if err := c.call(a.ctx, http.MethodPost, fmt.Sprintf("/api/v1/recordings/%d/restore", id), &r); err != nil {
			failures++
			fmt.Fprintf(a.stderr, "recording %d: %s\n", id, oneLine(err))
			continue
		}
		fmt.Fprintf(a.stdout, "restored  %s\n", printable(r.Path))
	}
	if failures > 0 {
		return statusError(exitSome)
	}
	return nil
}

// nothing says why there is nothing to restore.
func (c *restoreCmd) nothing(others []store.KeptBy) string {
	if c.OfRun == 0 {
		return "there is nothing in the attic"
	}
	words := fmt.Sprintf("the attic has no original for run %d", c.OfRun)
	for _, o := range others {
		when := "since"
		if o.RunID < c.OfRun {
			when = "before, and has them"
		}
		words += fmt.Sprintf("; run %d wrote %d of its files %s: restore --of-run %d brings those back", o.RunID, o.Originals, when, o.RunID)
	}
	return words
}

// list prints what is in the attic: originals by the numbers that bring them back, other files by where they are.
func (c *restoreCmd) list(a *app) error {
	kept, _, err := c.attic(a)
	if err != nil {
		return err
	}
	versions, err := c.versions(a)
	if err != nil {
		return err
	}
	for _, o := range kept {
		fmt.Fprintf(a.stdout, "%6d  run %-4d  %s  %s\n", o.RecordingID, o.RunID, o.KeptAt.Local().Format(minute), printable(o.Path))
	}
	if len(versions) > 0 {
		if len(kept) > 0 {
			fmt.Fprintln(a.stdout)
		}
		fmt.Fprintln(a.stdout, "Other versions, which only you can take back from where they are:")
	}
	for _, v := range versions {
		what := "with other tags"
		if v.Earlier {
			what = "an earlier original"
		}
		fmt.Fprintf(a.stdout, "%6d  run %-4d  %s  %s, %s: %s\n", v.RecordingID, v.RunID, v.KeptAt.Local().Format(minute), printable(v.Path), what, printable(v.File))
	}
	if len(kept) == 0 && len(versions) == 0 {
		fmt.Fprintln(a.stdout, "There is nothing in the attic.")
	}
	return nil
}

const minute = "2006-01-02 15:04"

// attic lists the originals asked for, page by page, and for which other runs those of a run's recordings are kept.
func (c *restoreCmd) attic(a *app) (all []store.Original, others []store.KeptBy, err error) {
	for after := int64(0); ; {
		var page struct {
			Originals []store.Original
			KeptBy    []store.KeptBy `json:"kept_by"`
		}
		path := fmt.Sprintf("/api/v1/attic?limit=1000&after=%d", after)
		if c.OfRun > 0 {
			path += fmt.Sprintf("&run=%d", c.OfRun)
		}
		if err := c.call(a.ctx, http.MethodGet, path, &page); err != nil || len(page.Originals) == 0 {
			return all, page.KeptBy, err
		}
		all = append(all, page.Originals...)
		after = all[len(all)-1].RecordingID
	}
}

// versions lists what else there is, page by page.
func (c *restoreCmd) versions(a *app) (all []store.Version, err error) {
	for after := int64(0); ; {
		var page struct{ Versions []store.Version }
		if err := c.call(a.ctx, http.MethodGet, fmt.Sprintf("/api/v1/attic/versions?limit=1000&after=%d", after), &page); err != nil || len(page.Versions) == 0 {
			return all, err
		}
		all = append(all, page.Versions...)
		after = all[len(all)-1].RecordingID
	}
}
