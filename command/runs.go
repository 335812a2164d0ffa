package command

import (
	"encoding/json"
	"fmt"
	"net/http"

	"evenshelf/store"
)

type runsCmd struct {
	client
	ID     int64 `arg:"" optional:"" help:"Show this run and its recordings."`
	Cancel bool  `help:"Cancel the run: recordings still waiting are left alone."`
	JSON   bool  `name:"json" help:"Print JSON instead."`
}

func (c *runsCmd) Run(a *app) error {
	if c.ID == 0 {
		if c.Cancel {
			return usageError("--cancel needs the number of a run")
		}
		return c.list(a)
	}
	var run store.Run
	path, method := fmt.Sprintf("/api/v1/runs/%d", c.ID), http.MethodGet
	if c.Cancel {
		path, method = path+"/cancel", http.MethodPost
	}
	if err := c.call(a.ctx, method, path, &run); err != nil {
		return err
	}
	if err := c.print(a, run); err != nil {
		return err
	}
	return c.jobs(a)
}

func (c *runsCmd) list(a *app) error {
	var page struct{ Runs []store.Run }
	if err := c.call(a.ctx, http.MethodGet, "/api/v1/runs?limit=100", &page); err != nil {
		return err
	}
	for _, r := range page.Runs {
		if err := c.print(a, r); err != nil {
			return err
		}
	}
	if len(page.Runs) == 0 && !c.JSON {
		fmt.Fprintln(a.stdout, "There have been no runs yet.")
	}
	return nil
}

func (c *runsCmd) print(a *app, r store.Run) error {
	if c.JSON {
		return json.NewEncoder(a.stdout).Encode(r)
	}
	where := r.ShelfName
	if r.Folder != "" {
		where += "/" + r.Folder
	}
	_, err := fmt.Fprintf(a.stdout, "%4d  %s  %-9s  %s, %s of %s: %d recordings, %d done, %d held, %d failed, %d waiting, %d cancelled\n",
		r.ID, r.CreatedAt.Local().Format("2006-01-02 15:04"), r.State, r.Profile, r.Delivery, printable(where),
		r.Jobs, r.Done, r.Held, r.Failed, r.Waiting+r.Working, r.Cancelled)
	return err
}

func (c *runsCmd) jobs(a *app) error {
	for after := int64(0); ; {
		var page struct{ Jobs []store.Job }
		if err := c.call(a.ctx, http.MethodGet, fmt.Sprintf("/api/v1/runs/%d/jobs?limit=1000&after=%d", c.ID, after), &page); err != nil {
			return err
		}
		if len(page.Jobs) == 0 {
			return nil
		}
		for _, j := range page.Jobs {
			after = j.ID
			if c.JSON {
				if err := json.NewEncoder(a.stdout).Encode(j); err != nil {
					return err
				}
				continue
			}
			line := fmt.Sprintf("      %-9s %s", j.State, printable(j.Path))
			if j.Reason != "" {
				line += ": " + printable(j.Reason)
			}
			fmt.Fprintln(a.stdout, line)
		}
	}
}
