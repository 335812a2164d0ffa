package worker

import (
	"context"
	"errors"
	"fmt"
	"os"
	"runtime/debug"
	"time"

	"github.com/riverqueue/river"
	"github.com/riverqueue/river/riverdriver/riversqlite"

	"evenshelf/engine/level"
	"evenshelf/store"
	"evenshelf/worker/delivery"
	"evenshelf/worker/discover"
)

// levelArgs is all the queue knows of a job; everything else is looked up when its turn comes. Each job
// has one entry that counts: uniqueness makes entering it again harmless.
type levelArgs struct {
	JobID int64 `json:"job_id" river:"unique"`
}

func (levelArgs) Kind() string { return store.QueueKind }

func (levelArgs) InsertOpts() river.InsertOpts {
	return river.InsertOpts{UniqueOpts: river.UniqueOpts{ByArgs: true}}
}

// enqueue enters jobs in the queue as part of the store's transaction.
func (s *Service) enqueue(ctx context.Context, tx *store.Tx, jobIDs []int64) error {
	params := make([]river.InsertManyParams, len(jobIDs))
	for i, id := range jobIDs {
		params[i] = river.InsertManyParams{Args: levelArgs{JobID: id}}
	}
	// A statement that can be cancelled costs the driver a goroutine; the transaction still ends with ctx.
	if _, err := s.client.InsertManyTx(context.WithoutCancel(ctx), tx, params); err != nil {
		return fmt.Errorf("enqueue %d jobs: %w", len(jobIDs), err)
	}
	return nil
}

type levelWorker struct {
	river.WorkerDefaults[levelArgs]
	service *Service
}

// NextRetry is River's question when to try again.
func (w *levelWorker) NextRetry(job *river.Job[levelArgs]) time.Time {
	return time.Now().Add(w.service.retryAfter(job.Attempt))
}

// storeTimeout bounds storing a result when the program is already being stopped.
const storeTimeout = 30 * time.Second

// storeAgainAfter is how long a job pauses when its start or end could not be stored. Such a pause does
// not count as an attempt: the job is not to blame, and its state would be out of step with the queue's.
const storeAgainAfter = 10 * time.Second

// Work does one job. A nil return means that the job has ended or is not to be done; an error, that the
// queue is to try again.
func (w *levelWorker) Work(ctx context.Context, job *river.Job[levelArgs]) error {
	s, id := w.service, job.Args.JobID
	log := s.log.With("job_id", id)
	work, err := s.store.StartJob(ctx, id)
	switch {
	case errors.Is(err, store.ErrState) || errors.Is(err, store.ErrNotFound):
		return nil // cancelled or ended since it was entered
	case ctx.Err() != nil:
		return ctx.Err()
	case err != nil:
		log.ErrorContext(ctx, "job not started", "error", err)
		return river.JobSnooze(storeAgainAfter)
	}

	made, failure := s.attempt(ctx, work)

	// From here on the result counts, even if the program is being stopped.
	ctx, cancel := context.WithTimeout(context.WithoutCancel(ctx), storeTimeout)
	defer cancel()
	if failure != nil {
		stopped := errors.Is(failure, context.Canceled)
		if stopped || job.Attempt < store.MaxAttempts {
			why := failure.Error()
			if stopped {
				why = "the program was stopped"
			}
			log.WarnContext(ctx, "job goes back to the queue", "path", work.Recording.Path, "why", why)
			if err := s.store.RetryJob(ctx, id, why); err != nil {
				log.ErrorContext(ctx, "job not put back", "error", err)
				return river.JobSnooze(storeAgainAfter)
			}
			return failure
		}
		made = result{outcome: failedBecause(fmt.Sprintf("%v (tried %d times)", failure, job.Attempt))}
	}
	complete := func(ctx context.Context, tx *store.Tx) error {
		_, err := river.JobCompleteTx[*riversqlite.Driver](ctx, tx, job)
		return err
	}
	err = s.finish(ctx, id, made, complete)
	if errors.Is(err, store.ErrInvalid) { // an outcome that cannot be stored now cannot be stored later
		made = result{outcome: failedBecause(fmt.Sprintf("a fault in the program: %v", err))}
		err = s.finish(ctx, id, made, complete)
	}
	switch {
	case errors.Is(err, store.ErrState):
		return nil
	case err != nil:
		log.ErrorContext(ctx, "result not stored", "error", err)
		return river.JobSnooze(storeAgainAfter)
	}
	log.InfoContext(ctx, "job ended", "path", work.Recording.Path, "state", made.outcome.Verdict.State, "reason", made.outcome.Verdict.Reason)
	return nil
}

// result is what a job came to.
type result struct {
	outcome level.Outcome
	output  string
	same    int64 // the earlier job whose result still stands, so that nothing was done; 0: none
}

func (s *Service) finish(ctx context.Context, id int64, r result, complete func(context.Context, *store.Tx) error) error {
	if r.same != 0 {
		return s.store.FinishSame(ctx, id, r.same, r.outcome.Verdict.Reason, complete)
	}
	return s.store.FinishJob(ctx, id, r.outcome, r.output, complete)
}

func failedBecause(reason string) level.Outcome {
	return level.Outcome{Verdict: level.Verdict{State: level.Failed, Reason: reason}}
}

// attempt does the work of a job. Its error means that trying again may help; context.Canceled means that
// the program is being stopped. A panic in the engine becomes a failed outcome, and the log gets the stack.
func (s *Service) attempt(ctx context.Context, w store.Work) (r result, err error) {
	defer func() {
		if p := recover(); p != nil {
			s.log.ErrorContext(ctx, "panic in the engine", "job_id", w.Job.ID, "path", w.Recording.Path, "panic", p, "stack", string(debug.Stack()))
			r, err = result{outcome: failedBecause(fmt.Sprintf("a fault in the program: %v", p))}, nil
		}
	}()
	source, err := discover.Resolve(w.Shelf.Root, w.Recording.Path)
	switch {
	case isGone(err):
		return result{outcome: failedBecause(err.Error())}, nil
	case err != nil:
		return r, err
	}
	r, err = s.work(ctx, w, source)
	var m *moved
	if errors.As(err, &m) { // its story goes on here; everything from the top, as that recording
		if w, err = s.follow(ctx, w, m); err == nil {
			r, err = s.work(ctx, w, source)
		}
	}
	switch {
	case errors.Is(ctx.Err(), context.DeadlineExceeded):
		return result{outcome: failedBecause(fmt.Sprintf("not done after %s", jobTimeout))}, nil
	case isGone(err):
		return result{outcome: failedBecause(err.Error())}, nil
	}
	if ctx.Err() != nil && err != nil {
		return r, ctx.Err()
	}
	return r, err
}

// isGone says that there is no file of a recording to level, which trying again does not change.
func isGone(err error) bool {
	return errors.Is(err, errNoOriginal) || errors.Is(err, discover.ErrMissing) || errors.Is(err, discover.ErrOutside) || errors.Is(err, discover.ErrNotFile)
}

// work does what the run asks with the file of a recording.
func (s *Service) work(ctx context.Context, w store.Work, source string) (r result, err error) {
	if w.Delivery == store.Measure {
		r.outcome, err = s.measure(ctx, w, source)
		return r, err
	}
	task, err := s.task(ctx, w)
	if err != nil {
		return r, err
	}
	key := fmt.Sprintf("job-%d", w.Job.ID)
	switch w.Delivery {
	case store.Replace:
		return s.replace(ctx, w, task, source, key)
	case store.Tags:
		return s.tag(ctx, w, task, source, key)
	}
	r.outcome, r.output, err = s.deliverCopy(ctx, w, task, source, key)
	return r, err
}

// measure only takes the before reading. A file that cannot be read will not be readable next time.
func (s *Service) measure(ctx context.Context, w store.Work, source string) (level.Outcome, error) {
	first, err := os.Stat(source)
	if err != nil {
		return level.Outcome{}, err
	}
	a, err := s.engine.Analyse(ctx, source, level.Options{Mono: w.Profile.Mono})
	if unchanged := delivery.Unchanged(source, first); unchanged != nil {
		return level.Outcome{}, unchanged
	}
	switch {
	case ctx.Err() != nil && err != nil:
		return level.Outcome{}, ctx.Err()
	case err != nil:
		return failedBecause(level.Reason(err, source)), nil
	}
	if err := s.whoever(ctx, w, nil)(a); err != nil {
		return level.Outcome{}, err
	}
	return level.Outcome{Before: a, Verdict: level.Verdict{State: level.Done}}, nil
}
