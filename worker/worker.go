// Package worker does the work: it scans shelves, and it takes the jobs of runs from the queue (River, in
// the same SQLite file as everything else), hands each recording to the engine, delivers the copy and
// stores how it ended.
//
// What makes this safe to stop, kill and start again:
//
//   - A job and its queue entry are made in one transaction, and end in one transaction. Between the two
//     a job can be done twice, never lost; doing it twice gives the same files and the same rows.
//   - Start first gives back what a killed process had taken (store.Reclaim), then re-enters waiting jobs
//     that the queue no longer knows (store.Requeue), then sweeps scratch files, then starts the queue.
//   - A result that would only come out again is left as it is: the file on the shelf is known by its hash, and the
//     job that made it by its profile, its engine and the gain it shared.
//   - An error that may heal (a disk that is full or away) puts the job back, with a pause, MaxAttempts
//     times. What cannot heal is an outcome: failed, with its reason. So is a panic.
package worker

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"runtime"
	"sync"
	"time"

	"github.com/riverqueue/river"
	"github.com/riverqueue/river/riverdriver/riversqlite"

	"evenshelf/engine/level"
	"evenshelf/engine/media"
	"evenshelf/engine/profile"
	"evenshelf/store"
	"evenshelf/worker/delivery"
	"evenshelf/worker/discover"
)

// Engine measures and levels one file at a time. It may be used by several jobs at once.
type Engine interface {
	// Analyse returns an error for a file it cannot read, with words fit for a person.
	Analyse(ctx context.Context, path string, o level.Options) (*level.Analysis, error)
	// Level writes the levelled sound to scratch and syncs it; if the outcome has no After there is no
	// scratch file. A damaged source is an outcome with the verdict failed; an error may heal.
	Level(ctx context.Context, source string, t level.Task, scratch string) (level.Outcome, error)
	// Tag writes a copy of source with its gain tags as measured to scratch; otherwise as Level. An outcome that is done
	// without After says that there is nothing to write.
	Tag(ctx context.Context, source string, t level.Task, scratch string) (level.Outcome, error)
	// Album reads which album a file is from; its title is "" if it names none.
	Album(ctx context.Context, path string) (media.Album, error)
	// Group measures recordings as one programme and leaves out those it cannot read. An error may heal.
	Group(ctx context.Context, paths []string, how level.Options) (level.Shared, error)
}

// Options are what a Service needs. Store and Engine are required.
type Options struct {
	Store   *store.Store
	Engine  Engine
	Log     *slog.Logger // nil = none
	Workers int          // jobs at work at once; 0 = one a processor
}

const (
	// jobTimeout is far beyond the longest honest job; it frees a worker from a file that never ends.
	jobTimeout = 6 * time.Hour
	// pollInterval is how soon a new run is noticed. A poll that finds nothing costs some 0.1 ms. (River's
	// listener would poll SQLite every 50 ms to the same end.)
	pollInterval = 250 * time.Millisecond
	// fetchCooldown is the least time between two polls that follow each other because jobs end quickly.
	fetchCooldown = 5 * time.Millisecond
	// keepEntries is how long River keeps entries of ended jobs; what anybody wants to know is in the store.
	keepEntries = time.Hour
	// hardStop is how long jobs get to return once their context is cancelled.
	hardStop = 10 * time.Second
)

// Service runs the queue.
type Service struct {
	store  *store.Store
	engine Engine
	log    *slog.Logger
	client *river.Client[*store.Tx]

	workers    int
	retryAfter func(attempt int) time.Duration
	places     turnstile[int64] // one job or restore at a time may change a recording's own file
	groups     turnstile[group] // one job at a time measures the recordings of a group together
	albums     turnstile[int64] // one job at a time reads the albums of a shelf

	mu      sync.Mutex
	started bool
}

// New returns a Service that is ready to start. It touches nothing yet.
func New(o Options) (*Service, error) {
	if o.Store == nil || o.Engine == nil {
		return nil, errors.New("worker: a store and an engine are required")
	}
	if o.Log == nil {
		o.Log = slog.New(slog.DiscardHandler)
	}
	if o.Workers <= 0 {
		o.Workers = runtime.GOMAXPROCS(0)
	}
	s := &Service{store: o.Store, engine: o.Engine, log: o.Log, workers: o.Workers, retryAfter: retryAfter}
	workers := river.NewWorkers()
	river.AddWorker(workers, &levelWorker{service: s})
	client, err := river.NewClient(riversqlite.New(o.Store.Writer()), &river.Config{
		Logger:            slog.New(quiet{o.Log.Handler()}),
		Workers:           workers,
		Queues:            map[string]river.QueueConfig{river.QueueDefault: {MaxWorkers: o.Workers}},
		MaxAttempts:       store.MaxAttempts,
		JobTimeout:        jobTimeout,
		FetchPollInterval: pollInterval,
		FetchCooldown:     fetchCooldown,
		PollOnly:          true,
		// Only a job that ignores its cancelled context for an hour is ever rescued.
		RescueStuckJobsAfter:        jobTimeout + time.Hour,
		CompletedJobRetentionPeriod: keepEntries,
		CancelledJobRetentionPeriod: keepEntries,
	})
	if err != nil {
		return nil, fmt.Errorf("worker: %w", err)
	}
	s.client = client
	return s, nil
}

// retryAfter is 4 s, then a minute: a hiccup heals in the first, a full disk hardly in the second.
func retryAfter(attempt int) time.Duration {
	if attempt <= 1 {
		return 4 * time.Second
	}
	return time.Minute
}

// Start gives back to the queue what a killed process left behind and starts working. It returns once
// the queue runs. Only Stop stops it: cancelling ctx afterwards does not.
func (s *Service) Start(ctx context.Context) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.started {
		return fmt.Errorf("worker: started already: %w", store.ErrState)
	}
	left, err := s.store.Reclaim(ctx)
	if err != nil {
		return fmt.Errorf("worker: %w", err)
	}
	lost, err := s.store.Requeue(ctx, s.enqueue)
	if err != nil {
		return fmt.Errorf("worker: %w", err)
	}
	if left > 0 || lost > 0 {
		s.log.WarnContext(ctx, "the program was stopped in the middle of its work", "jobs_given_back", left, "jobs_requeued", lost)
	}
	if left > 0 { // jobs at work left scratch files; a restore clears its own away when it is repeated
		s.sweep(ctx)
	}
	if err := s.client.Start(context.WithoutCancel(ctx)); err != nil {
		return fmt.Errorf("worker: start the queue: %w", err)
	}
	s.started = true
	return nil
}

// sweep removes scratch files. What cannot be removed is logged: it is in nobody's way.
func (s *Service) sweep(ctx context.Context) {
	shelves, err := s.store.Shelves(ctx)
	if err != nil {
		s.log.ErrorContext(ctx, "sweep", "error", err)
	}
	for _, shelf := range shelves {
		for _, folder := range []string{shelf.Copies, shelf.Root} {
			removed, err := delivery.Sweep(folder)
			if err != nil {
				s.log.WarnContext(ctx, "sweep", "folder", folder, "error", err)
			}
			if removed > 0 {
				s.log.InfoContext(ctx, "swept scratch files", "folder", folder, "files", removed)
			}
		}
	}
}

// Stop takes no new jobs and waits for those at work until ctx is done; then it cancels them, and they go
// back to waiting. It returns an error only if a job does not heed even that. It may be called twice.
func (s *Service) Stop(ctx context.Context) error {
	if err := s.client.Stop(ctx); err == nil {
		return nil
	}
	hard, cancel := context.WithTimeout(context.WithoutCancel(ctx), hardStop)
	defer cancel()
	if err := s.client.StopAndCancel(hard); err != nil {
		return fmt.Errorf("worker: a job did not stop within %s of being told to: %w", hardStop, err)
	}
	return nil
}

// StartRun stores a run and enters its jobs in the queue, both or neither. It wraps store.ErrFormat if no file of the run
// could take its original's place; where only some cannot, their jobs say so.
func (s *Service) StartRun(ctx context.Context, n store.NewRun) (store.Run, error) {
	if n.Delivery == store.Replace && n.Profile.Delivered.Format != profile.OwnFormat {
		paths, err := s.store.Paths(ctx, n)
		if err != nil {
			return store.Run{}, err
		}
		unfit := ""
		for _, p := range paths {
			if unfit = delivery.Unfit(n.Profile.Delivered.Format, p); unfit == "" {
				break
			}
		}
		if unfit != "" {
			return store.Run{}, fmt.Errorf("none of the %d files could be replaced: %s: %w", len(paths), unfit, store.ErrFormat)
		}
	}
	return s.store.CreateRun(ctx, n, s.enqueue)
}

// CancelRun cancels the jobs of a run that have not begun; those at work finish.
func (s *Service) CancelRun(ctx context.Context, id int64) (store.Run, error) {
	return s.store.CancelRun(ctx, id)
}

// Scan looks for recordings below a folder of a shelf ("" = all of it) and stores what it found. Folders
// that could not be read are named in the result, and what is known below them is left as it is.
func (s *Service) Scan(ctx context.Context, shelfID int64, folder string) (store.ScanResult, error) {
	shelf, err := s.store.Shelf(ctx, shelfID)
	if err != nil {
		return store.ScanResult{}, err
	}
	var files []store.FoundFile
	err = discover.Walk(ctx, shelf.Root, folder, func(f store.FoundFile) error {
		files = append(files, f)
		return nil
	})
	var unread *discover.Unread
	if err != nil && !errors.As(err, &unread) {
		return store.ScanResult{}, err
	}
	if unread == nil {
		return s.store.Found(ctx, shelfID, folder, files)
	}
	s.log.WarnContext(ctx, "scan", "shelf", shelf.Name, "error", unread)
	return s.store.FoundPartly(ctx, shelfID, folder, files, unread.Folders)
}
