package store

import (
	"context"
	"database/sql"
	"fmt"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
)

const sharedQuery = `SELECT integrated, peak FROM shared WHERE run_id = ? AND name = ?`

func scanShared(row scanner) (level.Shared, error) {
	var integrated, peak sql.NullFloat64
	err := row.Scan(&integrated, &peak)
	sh := level.Shared{Integrated: audio.LUFS(audio.Undefined), TruePeak: audio.DBTP(audio.Undefined)}
	if integrated.Valid {
		sh.Integrated = audio.LUFS(integrated.Float64)
	}
	if peak.Valid {
		sh.TruePeak = audio.DBTP(peak.Float64)
	}
	return sh, err
}

// Shared returns what the recordings of a folder read as one programme in a run. ErrNotFound until that was measured.
func (s *Store) Shared(ctx context.Context, runID int64, folder string) (sh level.Shared, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		sh, err = one(ctx, tx, scanShared, fmt.Sprintf("shared reading of folder %q in run %d", folder, runID), sharedQuery, runID, folder)
		return err
	})
	return sh, err
}

// KeepShared stores a shared reading and returns the one that holds: the first that was kept, so that all
// recordings of the folder get one gain even if two jobs measured it.
func (s *Store) KeepShared(ctx context.Context, runID int64, folder string, measured level.Shared) (sh level.Shared, err error) {
	err = s.write(ctx, func(tx *sql.Tx) error {
		_, err := tx.ExecContext(ctx, `INSERT INTO shared (run_id, name, integrated, peak) VALUES (?, ?, ?, ?) ON CONFLICT (run_id, name) DO NOTHING`,
			runID, folder, pointer(measured.Integrated), pointer(measured.TruePeak))
		if err != nil {
			return err
		}
		sh, err = one(ctx, tx, scanShared, "it", sharedQuery, runID, folder)
		return err
	})
	if err != nil {
		return level.Shared{}, fmt.Errorf("shared reading of folder %q in run %d: %w", folder, runID, err)
	}
	return sh, nil
}

// Members returns the recordings of one folder ("" is the root) of a run's shelf in path order, without those of its
// sub-folders and those missing from the disk. All of them count, also those the run does not take: a folder that is
// levelled bit by bit has to come out as one that is levelled at once.
func (s *Store) Members(ctx context.Context, runID int64, folder string) (list []Recording, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		run, err := findRun(ctx, tx, runID)
		if err != nil {
			return err
		}
		w := conditions{}
		w.add("shelf_id = ?", run.ShelfID)
		w.folder("path", folder)
		rest := 1 // where the name begins; both functions count characters
		if folder != "" {
			rest += len([]rune(folder)) + 1
		}
		w.add("instr(substr(path, ?), '/') = 0", rest)
		w.add("missing = 0")
		list, err = collect(ctx, tx, scanRecording, `SELECT `+recordingColumns+` FROM recordings`+w.where()+` ORDER BY path`, w.args...)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("recordings of folder %q in run %d: %w", folder, runID, err)
	}
	return list, nil
}
