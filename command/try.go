package command

import (
	"context"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"math"
	"os"
	"path/filepath"
	"text/tabwriter"
	"time"

	"evenshelf/engine/demo"
	"evenshelf/engine/profile"
	"evenshelf/store"
)

type tryCmd struct {
	Once   bool   `help:"End when the shelf is level: exit code 0 only if every sound recording is in tolerance, and every damaged one is held or failed with its reason."`
	Listen string `name:"listen" help:"Address and port of the dashboard." default:"127.0.0.1:8470" placeholder:"HOST:PORT"`
}

// tryProfile is the profile the demo shelf is levelled with.
const tryProfile = "rotation"

func (c *tryCmd) Run(a *app) error {
	dir := filepath.Join(a.Data, "try")
	a.log = slog.New(slog.NewTextHandler(a.stderr, &slog.HandlerOptions{Level: max(a.LogLevel, slog.LevelWarn)}))
	p, err := profile.Named(tryProfile)
	if err != nil {
		return err
	}
	engine, err := a.engine()
	if err != nil {
		return err
	}
	listen := c.Listen
	if c.Once {
		listen = "127.0.0.1:0"
	}
	if err := clearTry(a.ctx, dir); err != nil {
		return err
	}
	s, err := a.startServer(serverOptions{data: dir, listen: listen})
	if err != nil {
		return err
	}
	defer s.stop()
	root := filepath.Join(dir, "shelf")
	fmt.Fprintf(a.stdout, "Making the recordings of an invented radio station in %s …\n", root)
	items, err := demo.Write(a.ctx, engine.Media, root, nil)
	if err != nil {
		return err
	}
	run, err := c.levelShelf(a, s, root, p)
	if err != nil {
		return err
	}
	report, err := c.report(a.ctx, s, run, items, p)
	if err != nil {
		return err
	}
	report.print(a.stdout)
	if !c.Once {
		fmt.Fprintf(a.stdout, "\nThe dashboard is at %s  (Ctrl-C ends it)\nThe levelled copies are in %s\n",
			s.url, filepath.Join(dir, "copies", "demo"))
		select {
		case <-a.ctx.Done():
		case err := <-s.failed:
			return err
		}
	}
	if len(report.wrong) > 0 {
		return errors.New(report.verdict())
	}
	return nil
}

// clearTry removes what an earlier try made: the folder is Evenshelf's own. A try that is still running
// there is left in peace.
func clearTry(ctx context.Context, dir string) error {
	database := filepath.Join(dir, "evenshelf.db")
	if _, err := os.Stat(database); err == nil {
		st, err := store.Open(ctx, store.Options{Path: database})
		if errors.Is(err, store.ErrState) {
			return err
		}
		if err == nil {
			st.Close()
		}
	}
	return os.RemoveAll(dir)
}

// levelShelf puts the shelf through the real queue and waits for the run to end.
func (c *tryCmd) levelShelf(a *app, s *server, root string, p profile.Profile) (store.Run, error) {
	if err := a.ensureShelf(s.store, "demo", root, filepath.Join(filepath.Dir(root), "copies")); err != nil {
		return store.Run{}, err
	}
	shelf, err := s.store.ShelfNamed(a.ctx, "demo")
	if err != nil {
		return store.Run{}, err
	}
	if _, err := s.queue.Scan(a.ctx, shelf.ID, ""); err != nil {
		return store.Run{}, err
	}
	started := time.Now()
	run, err := s.queue.StartRun(a.ctx, store.NewRun{ShelfID: shelf.ID, Profile: p, Delivery: store.Copy})
	if err != nil {
		return run, err
	}
	fmt.Fprintf(a.stdout, "Levelling %d recordings with the profile %s …\n", run.Jobs, p.Name)
	bar := newProgress(a.stderr)
	defer bar.clear()
	for {
		changed := s.store.Changed()
		if run, err = s.store.Run(a.ctx, run.ID); err != nil {
			return run, err
		}
		bar.draw(tally{run.Done + run.Held + run.Failed, run.Jobs, run.BytesDone, run.BytesTotal, run.SecondsDone})
		if run.FinishedAt != nil {
			bar.clear()
			fmt.Fprintf(a.stdout, "%s of sound in %.1f s\n\n", duration(run.SecondsDone), time.Since(started).Seconds())
			return run, nil
		}
		select {
		case <-changed:
		case <-a.ctx.Done():
			return run, context.Cause(a.ctx)
		}
	}
}

// tryReport compares what came out with what the demo shelf was made to show.
type tryReport struct {
	rows          []tryRow
	before, after spread // of the sound recordings
	target        float64
	wrong         []string
}

type tryRow struct {
	item demo.Item
	job  store.Job
}

// spread is the range of integrated loudness over many recordings.
type spread struct{ low, high float64 }

func emptySpread() spread { return spread{math.Inf(1), math.Inf(-1)} }

func (s *spread) add(v *float64) {
	if v != nil {
		s.low, s.high = min(s.low, *v), max(s.high, *v)
	}
}

func (c *tryCmd) report(ctx context.Context, s *server, run store.Run, items []demo.Item, p profile.Profile) (tryReport, error) {
	r := tryReport{before: emptySpread(), after: emptySpread(), target: float64(p.Target)}
	jobs, err := s.store.Jobs(ctx, store.JobQuery{RunID: run.ID, Limit: 1000})
	if err != nil {
		return r, err
	}
	byPath := map[string]store.Job{}
	for _, j := range jobs {
		byPath[j.Path] = j
	}
	for _, item := range items {
		j, ok := byPath[item.Path]
		if !ok {
			r.wrong = append(r.wrong, item.Path+": was not found by the scan")
			continue
		}
		r.rows = append(r.rows, tryRow{item, j})
		if item.Damaged {
			if (j.State != store.Held && j.State != store.Failed) || j.Reason == "" {
				r.wrong = append(r.wrong, fmt.Sprintf("%s: is damaged, but ended %s", item.Path, j.State))
			}
			continue
		}
		switch {
		case j.State != store.Done || j.Before == nil || j.After == nil || j.After.Integrated == nil:
			r.wrong = append(r.wrong, fmt.Sprintf("%s: ended %s: %s", item.Path, j.State, j.Reason))
			continue
		case math.Abs(*j.After.Integrated-r.target) > float64(p.Tolerance):
			r.wrong = append(r.wrong, fmt.Sprintf("%s: came out at %s LUFS", item.Path, figure(*j.After.Integrated, 0)))
		}
		r.before.add(j.Before.Integrated)
		r.after.add(j.After.Integrated)
	}
	return r, nil
}

func (r tryReport) print(w io.Writer) {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	fmt.Fprintln(t, "before LUFS\tafter LUFS\trange LU\tpeak dBTP\tstate\trecording")
	for _, row := range r.rows {
		b, a := row.job.Before, row.job.After
		if b == nil {
			b = &store.Figures{}
		}
		if a == nil {
			a = &store.Figures{}
		}
		fmt.Fprintf(t, "%s\t%s\t%s → %s\t%s → %s\t%s\t%s\n", maybe(b.Integrated), maybe(a.Integrated),
			maybe(b.Range), maybe(a.Range), maybe(b.TruePeak), maybe(a.TruePeak), row.job.State, row.item.Path)
	}
	t.Flush()
	fmt.Fprintln(w)
	for _, row := range r.rows {
		if row.job.Reason != "" {
			fmt.Fprintf(w, "%s, %s: %s\n", row.item.Path, row.job.State, printable(row.job.Reason))
		}
	}
	fmt.Fprintf(w, "\n%s\n", r.verdict())
}

func maybe(v *float64) string {
	if v == nil {
		return figure(math.NaN(), 6)
	}
	return figure(*v, 6)
}

func (r tryReport) verdict() string {
	s := fmt.Sprintf("Quietest to loudest sound recording: %.1f LU before, %.2f LU after; the furthest is %.2f LU from the target of %s LUFS.",
		r.before.high-r.before.low, r.after.high-r.after.low, max(r.after.high-r.target, r.target-r.after.low), figure(r.target, 0))
	for _, w := range r.wrong {
		s += "\nNOT AS IT SHOULD BE: " + w
	}
	return s
}
