package store

import (
	"cmp"
	"context"
	"database/sql"
	"encoding/json"
	"fmt"
	"math"

	"evenshelf/engine/audio"
	"evenshelf/engine/faults"
	"evenshelf/engine/level"
)

// The kinds of reading.
const (
	kindBefore = "before"
	kindAfter  = "after"
)

// Readings returns the latest before and after readings (either may be nil), without timelines. Readings
// of a file that has changed since are history and not returned.
func (s *Store) Readings(ctx context.Context, recordingID int64) (b, a *Reading, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		if _, err := findRecording(ctx, tx, recordingID); err != nil {
			return err
		}
		readings, err := collect(ctx, tx, scanReading, `
			SELECT id, recording_id, job_id, kind, measured_at, detail FROM readings
			WHERE id IN (SELECT before_id FROM recordings WHERE id = ?1 UNION ALL SELECT after_id FROM recordings WHERE id = ?1)`, recordingID)
		for i := range readings {
			if readings[i].Kind == kindBefore {
				b = &readings[i]
			} else {
				a = &readings[i]
			}
		}
		return err
	})
	if err != nil {
		return nil, nil, fmt.Errorf("readings: %w", err)
	}
	return b, a, nil
}

func scanReading(row scanner) (r Reading, err error) {
	var measured int64
	var detail []byte
	if err := row.Scan(&r.ID, &r.RecordingID, &r.JobID, &r.Kind, &measured, &detail); err != nil {
		return r, err
	}
	r.MeasuredAt = fromMillis(measured)
	r.Analysis = level.Unmeasured()
	if err := json.Unmarshal(detail, &r.Analysis); err != nil {
		return r, fmt.Errorf("reading %d: %w", r.ID, err)
	}
	if r.Faults == nil {
		r.Faults = []faults.Fault{}
	}
	r.MonoRule = cmp.Or(r.MonoRule, audio.OneChannel) // the only rule there was when readings did not name it
	return r, nil
}

// insertReading stores an analysis and its timeline and returns the reading's id.
func insertReading(ctx context.Context, tx *sql.Tx, recordingID, jobID int64, kind string, at int64, a *level.Analysis) (int64, error) {
	detail, err := json.Marshal(a)
	if err != nil {
		return 0, fmt.Errorf("%s reading: %w: %w", kind, err, ErrInvalid)
	}
	levels, err := packLevels(a.Timeline)
	if err != nil {
		return 0, fmt.Errorf("%s reading: %w: %w", kind, err, ErrInvalid)
	}
	course, err := packCourse(a.Timeline.Course, len(a.Timeline.Momentary))
	if err != nil {
		return 0, fmt.Errorf("%s reading: %w: %w", kind, err, ErrInvalid)
	}
	args := append([]any{recordingID, jobID, kind, at, a.Engine, a.Decoder, a.Duration}, figuresOf(a)...)
	id, err := one(ctx, tx, scanID, kind+" reading", `
		INSERT INTO readings (recording_id, job_id, kind, measured_at, engine, decoder, duration, integrated, "range", peak, p10, p95, detail)
		VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?) RETURNING id`, append(args, string(detail))...)
	if err != nil {
		return 0, err
	}
	_, err = tx.ExecContext(ctx, `INSERT INTO timelines (reading_id, step, curves, course) VALUES (?, ?, ?, ?)`, id, a.Timeline.Step, levels, course)
	if err != nil {
		return 0, fmt.Errorf("%s timeline: %w", kind, err)
	}
	return id, nil
}

// figuresOf returns integrated loudness, range, true peak, and the 10th and 95th percentile of the
// short-term loudness, NULL where not defined.
func figuresOf(a *level.Analysis) []any {
	return []any{defined(a.Integrated), defined(a.Range), defined(a.TruePeak), defined(a.ShortTerm10), defined(a.ShortTerm95)}
}

func defined[F ~float64](f F) any {
	if !audio.Defined(f) {
		return nil
	}
	return math.Round(float64(f)*1e4) / 1e4 // as in the reading's JSON
}
