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
	ids := c.IDs
	if len(ids) == 0 {
		kept, err := c.attic(a)
		if err != nil {
			return err
		}
		for _, o := range kept {
			if c.List {
				fmt.Fprintf(a.stdout, "%6d  run %-4d  %s  %s\n", o.RecordingID, o.RunID, o.KeptAt.Local().Format("2006-01-02 15:04"), printable(o.Path))
			}
			ids = append(ids, o.RecordingID)
		}
		if len(kept) == 0 {
			fmt.Fprintln(a.stdout, "There is nothing in the attic for that.")
		}
	}
	if c.List {
		return nil
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

// attic lists the originals asked for, page by page.
func (c *restoreCmd) attic(a *app) (all []store.Original, err error) {
	for after := int64(0); ; {
		var page struct{ Originals []store.Original }
		path := fmt.Sprintf("/api/v1/attic?limit=1000&after=%d", after)
		if c.OfRun > 0 {
			path += fmt.Sprintf("&run=%d", c.OfRun)
		}
		if err := c.call(a.ctx, http.MethodGet, path, &page); err != nil || len(page.Originals) == 0 {
			return all, err
		}
		all = append(all, page.Originals...)
		after = all[len(all)-1].RecordingID
	}
}
