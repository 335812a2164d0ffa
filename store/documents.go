package store

import (
	"cmp"
	"context"
	"database/sql"
	"encoding/json"
	"fmt"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/engine/meter"
	"evenshelf/engine/profile"
)

// documents are what a job has in JSON columns, nil where there is none.
type documents struct{ plan, doubts, treatment, foreseen []byte }

// into reads the documents into a job. What the engine of their day did not tell is undefined.
func (d documents) into(j *Job) error {
	j.Doubts = []level.Doubt{}
	if d.plan != nil {
		none := audio.LUFS(audio.Undefined)
		j.Plan = &level.Plan{Anchor: profile.Programme, Anchored: none, Aim: none}
		if err := json.Unmarshal(d.plan, j.Plan); err != nil {
			return fmt.Errorf("plan: %w", err)
		}
	}
	if d.doubts != nil {
		if err := json.Unmarshal(d.doubts, &j.Doubts); err != nil {
			return fmt.Errorf("doubts: %w", err)
		}
	}
	if d.treatment != nil {
		j.Treatment = &level.Treatment{Compressed: audio.DB(audio.Undefined)}
		if err := json.Unmarshal(d.treatment, j.Treatment); err != nil {
			return fmt.Errorf("treatment: %w", err)
		}
	}
	if d.foreseen != nil {
		r := meter.Unmeasured()
		if err := json.Unmarshal(d.foreseen, &r); err != nil {
			return fmt.Errorf("foreseen: %w", err)
		}
		j.Foreseen = &Figures{pointer(r.Integrated), pointer(r.Range), pointer(r.TruePeak), pointer(r.ShortTerm10), pointer(r.ShortTerm95)}
	}
	return nil
}

func pointer[F ~float64](f F) *float64 {
	if !audio.Defined(f) {
		return nil
	}
	v := float64(f)
	return &v
}

// document returns v as a JSON column has it: NULL if there is nothing to tell.
func document[T any](what string, v *T) (any, error) {
	if v == nil {
		return nil, nil
	}
	b, err := json.Marshal(v)
	if err != nil {
		return nil, fmt.Errorf("%s: %w: %w", what, err, ErrInvalid)
	}
	return string(b), nil
}

// storeDocuments stores what an outcome tells beyond its verdict and readings. The curve of the ride has a
// table of its own and is taken out of the plan.
func storeDocuments(ctx context.Context, tx *sql.Tx, jobID int64, o level.Outcome) error {
	plan, err := document("plan", o.Plan)
	if err != nil {
		return err
	}
	treatment, err := document("treatment", o.Treatment)
	if err != nil {
		return err
	}
	foreseen, err := document("foreseen", o.Foreseen)
	if err != nil {
		return err
	}
	var doubts any
	if len(o.Verdict.Doubts) > 0 {
		if doubts, err = document("doubts", &o.Verdict.Doubts); err != nil {
			return err
		}
	}
	if _, err := tx.ExecContext(ctx, `UPDATE jobs SET plan = json_remove(?, '$.ride.curve'), doubts = ?, treatment = ?, foreseen = ? WHERE id = ?`,
		plan, doubts, treatment, foreseen, jobID); err != nil {
		return err
	}
	if o.Plan == nil || o.Plan.Ride == nil {
		return nil
	}
	// As the curve says itself: what is rendered from it again has to be the same to the last bit.
	curve, err := document("ride", &o.Plan.Ride.Gain)
	if err != nil {
		return err
	}
	_, err = tx.ExecContext(ctx, `INSERT INTO rides (job_id, curve) VALUES (?, ?)`, jobID, curve)
	return err
}

// Plan returns the whole plan of a job, with the curve of its ride, as it was rendered and can be rendered again;
// nil if nothing was planned. Its curve is nil only if there is no ride.
func (s *Store) Plan(ctx context.Context, jobID int64) (plan *level.Plan, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		job, err := findJob(ctx, tx, jobID)
		if plan = job.Plan; err != nil || plan == nil || plan.Ride == nil {
			return err
		}
		curve, err := one(ctx, tx, func(row scanner) (b []byte, err error) { return b, row.Scan(&b) },
			fmt.Sprintf("ride of job %d", jobID), `SELECT curve FROM rides WHERE job_id = ?`, cmp.Or(job.SameAs, jobID))
		if err != nil {
			return err
		}
		return json.Unmarshal(curve, &plan.Ride.Gain)
	})
	if err != nil {
		return nil, fmt.Errorf("plan of job %d: %w", jobID, err)
	}
	return plan, nil
}

// Stands reports whether what a job delivered is what levelling would give again: it levelled and is done, with that
// version of a profile and by this engine.
func (s *Store) Stands(ctx context.Context, jobID int64, profileVersion string) (ok bool, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		return tx.QueryRowContext(ctx, `SELECT EXISTS (SELECT 1 FROM jobs j JOIN runs r ON r.id = j.run_id
			JOIN readings a ON a.job_id = coalesce(j.same_as, j.id) AND a.kind = 'after'
			WHERE j.id = ? AND j.state = 'done' AND r.delivery IN ('copy', 'replace') AND r.profile_version = ? AND a.engine = ?)`, jobID, profileVersion, level.Version).Scan(&ok)
	})
	if err != nil {
		return false, fmt.Errorf("result of job %d: %w", jobID, err)
	}
	return ok, nil
}

// HeldFor returns why recordings are held, by their ids. Those that are not held, or were held by an engine that
// told it in one sentence only, are left out.
func (s *Store) HeldFor(ctx context.Context, recordingIDs []int64) (doubts map[int64][]level.Doubt, err error) {
	ids, err := json.Marshal(recordingIDs)
	if err != nil {
		return nil, err
	}
	type held struct {
		id     int64
		doubts []level.Doubt
	}
	var list []held
	err = s.read(ctx, func(tx *sql.Tx) error {
		list, err = collect(ctx, tx, func(row scanner) (h held, err error) {
			var b []byte
			if err := row.Scan(&h.id, &b); err != nil {
				return h, err
			}
			return h, json.Unmarshal(b, &h.doubts)
		}, `SELECT rec.id, j.doubts FROM recordings rec JOIN readings a ON a.id = rec.after_id JOIN jobs j ON j.id = a.job_id
			WHERE rec.id IN (SELECT value FROM json_each(?)) AND rec.state = 'held' AND j.doubts IS NOT NULL`, string(ids))
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("held recordings: %w", err)
	}
	doubts = make(map[int64][]level.Doubt, len(list))
	for _, h := range list {
		doubts[h.id] = h.doubts
	}
	return doubts, nil
}
