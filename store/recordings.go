package store

import (
	"context"
	"database/sql"
	"fmt"
	"slices"
	"strings"
)

// recordingColumns are read by scanRecording. The shelf's name is a sub-query rather than a join, so that
// the planner has only one table to choose an index for.
const recordingColumns = `id, shelf_id, (SELECT name FROM shelves WHERE shelves.id = shelf_id) AS shelf_name, path, size, modified_at,
	added_at, missing, format, duration, state, reason, faults, profile, job_id,
	before_id, before_integrated, before_range, before_peak, before_p10, before_p95,
	after_id, after_integrated, after_range, after_peak, after_p10, after_p95`

func scanRecording(row scanner) (r Recording, err error) {
	var modified, added int64
	var before, after storedFigures
	err = row.Scan(append(append([]any{&r.ID, &r.ShelfID, &r.ShelfName, &r.Path, &r.Size, &modified,
		&added, &r.Missing, &r.Format, &r.Duration, &r.State, &r.Reason, &r.Faults, &r.Profile, &r.JobID},
		before.dest()...), after.dest()...)...)
	r.ModifiedAt, r.AddedAt = fromMillis(modified), fromMillis(added)
	r.Before, r.After = before.figures(), after.figures()
	return r, err
}

// storedFigures scans a reading's id and its five figures; without an id there was no reading. It scans
// into interfaces because database/sql assigns those directly; pointers to pointers go through reflection,
// which doubles the time of a spine chart.
type storedFigures [6]any

func (s *storedFigures) dest() []any { return []any{&s[0], &s[1], &s[2], &s[3], &s[4], &s[5]} }

func (s *storedFigures) figures() *Figures {
	if s[0] == nil {
		return nil
	}
	var f struct { // one allocation for all five
		Figures
		values [5]float64
	}
	for i, p := range []**float64{&f.Integrated, &f.Range, &f.TruePeak, &f.ShortTerm10, &f.ShortTerm95} {
		if v, ok := s[i+1].(float64); ok {
			f.values[i] = v
			*p = &f.values[i]
		}
	}
	return &f.Figures
}

// Recording returns one recording.
func (s *Store) Recording(ctx context.Context, id int64) (r Recording, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		r, err = findRecording(ctx, tx, id)
		return err
	})
	return r, err
}

func findRecording(ctx context.Context, tx *sql.Tx, id int64) (Recording, error) {
	return one(ctx, tx, scanRecording, fmt.Sprintf("recording %d", id),
		`SELECT `+recordingColumns+` FROM recordings WHERE id = ?`, id)
}

// Never is what RecordingQuery.State takes for recordings without a job.
const Never JobState = "never"

var jobStates = []JobState{Waiting, Working, Done, Held, Failed, Cancelled}

// Recordings returns a page of the recordings that match, those missing from the disk included.
// Searching ignores case; recordings without a value for the order come last.
func (s *Store) Recordings(ctx context.Context, q RecordingQuery) (page RecordingPage, err error) {
	w, err := q.conditions()
	if err != nil {
		return page, fmt.Errorf("recordings: %w", err)
	}
	err = s.read(ctx, func(tx *sql.Tx) error {
		all := q.search(w)
		if err := tx.QueryRowContext(ctx, `SELECT count(*) FROM recordings`+all.where(), all.args...).Scan(&page.Total); err != nil {
			return err
		}
		if q.Search != "" && page.Total <= fewMatches {
			all = w.with("id IN (SELECT id FROM recordings"+all.where()+")", all.args...)
		}
		page.Recordings, page.Next, err = findPage(ctx, tx, q, all)
		return err
	})
	if err != nil {
		return RecordingPage{}, fmt.Errorf("recordings: %w", err)
	}
	return page, nil
}

// fewMatches decides how a page of a search is found. Many matches: walk the order until the page is full,
// which is soon. Few: look them up and sort them, or the walk would go through all that does not match.
const fewMatches = 2000

// search adds the search to the conditions. Not LIKE: nothing to escape, and every script.
func (q RecordingQuery) search(w conditions) conditions {
	if q.Search == "" {
		return w
	}
	return w.with("instr(folded, ?) > 0", fold(q.Search))
}

func (q RecordingQuery) conditions() (w conditions, err error) {
	if err := checkFolder(q.Folder); err != nil {
		return w, err
	}
	if q.ShelfID != 0 {
		w.add("shelf_id = ?", q.ShelfID)
	}
	switch {
	case q.State == "":
	case q.State == Never:
		w.add("state = ''")
	case slices.Contains(jobStates, q.State):
		w.add("state = ?", string(q.State))
	default:
		return w, fmt.Errorf("state %q: %w", q.State, ErrInvalid)
	}
	w.folder("path", q.Folder)
	if q.RunID != 0 {
		w.add("EXISTS (SELECT 1 FROM jobs WHERE jobs.run_id = ? AND jobs.recording_id = recordings.id)", q.RunID)
	}
	return w, nil
}

func findPage(ctx context.Context, tx *sql.Tx, q RecordingQuery, w conditions) (list []Recording, next string, err error) {
	sort := q.Sort
	if sort == "" {
		sort = "path"
	}
	key, ok := sortKeys[sort]
	if !ok {
		return nil, "", fmt.Errorf("order %q: %w", q.Sort, ErrInvalid)
	}
	limit, err := pageLimit(q.Limit)
	if err != nil {
		return nil, "", err
	}
	var at *cursor
	if q.Cursor != "" {
		c, err := parseCursor(q.Cursor, sort, q.Desc)
		if err != nil {
			return nil, "", err
		}
		at = &c
	}
	beyond, direction := ">", "ASC"
	if q.Desc {
		beyond, direction = "<", "DESC"
	}
	shelves, err := q.shelves(ctx, tx)
	if err != nil {
		return nil, "", err
	}
	fetch := func(w conditions, order string) error { // one row more than asked for tells that there is a next page
		query, args := perShelf(shelves, w, fmt.Sprintf(` ORDER BY %s LIMIT %d`, order, limit+1-len(list)))
		more, err := collect(ctx, tx, scanRecording, query, args...)
		list = append(list, more...)
		return err
	}
	list = []Recording{}
	if at == nil || at.value() != nil {
		valued := w.with(key.column + " IS NOT NULL")
		if at != nil {
			valued = valued.with(fmt.Sprintf("(%s, id) %s (?, ?)", key.column, beyond), at.value(), at.ID)
		}
		if err := fetch(valued, key.column+" "+direction+", id "+direction); err != nil {
			return nil, "", err
		}
	}
	if len(list) <= limit && !key.always {
		without := w.with(key.column + " IS NULL")
		if at != nil && at.value() == nil {
			without = without.with("id "+beyond+" ?", at.ID)
		}
		if err := fetch(without, "id "+direction); err != nil {
			return nil, "", err
		}
	}
	if len(list) > limit {
		list = list[:limit]
		next = cursorAfter(sort, q.Desc, &list[limit-1])
	}
	return list, next, nil
}

// shelves returns the shelves that the query is about.
func (q RecordingQuery) shelves(ctx context.Context, tx *sql.Tx) ([]int64, error) {
	if q.ShelfID != 0 {
		return []int64{q.ShelfID}, nil
	}
	return collect(ctx, tx, scanID, `SELECT id FROM shelves`)
}

// perShelf asks each shelf for the first rows of the order, which its index has ready, and takes the first
// of those. Shelves are few; an index over all of them for each order would double the cost of a scan.
func perShelf(shelves []int64, w conditions, orderAndLimit string) (query string, args []any) {
	if len(shelves) == 0 {
		return `SELECT ` + recordingColumns + ` FROM recordings WHERE 0`, nil
	}
	var parts []string
	for _, id := range shelves {
		on := w.with("shelf_id = ?", id)
		parts = append(parts, `SELECT * FROM (SELECT `+recordingColumns+` FROM recordings`+on.where()+orderAndLimit+`)`)
		args = append(args, on.args...)
	}
	if len(parts) == 1 {
		return parts[0], args
	}
	return strings.Join(parts, ` UNION ALL `) + orderAndLimit, args
}

// Spines returns every recording of a shelf that is not missing, in path order, for the spine chart.
func (s *Store) Spines(ctx context.Context, shelfID int64) (list []Spine, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		if _, err := findShelf(ctx, tx, shelfID); err != nil {
			return err
		}
		var id int64
		var path, state string
		var before, after storedFigures
		dest := append(append([]any{&id, &path, &state}, before.dest()...), after.dest()...)
		list, err = collect(ctx, tx, func(row scanner) (p Spine, err error) {
			err = row.Scan(dest...)
			p.ID, p.Path, p.State = id, path, JobState(state)
			p.Before, p.After = before.figures(), after.figures()
			return p, err
		}, `SELECT id, path, state,
				before_id, before_integrated, before_range, before_peak, before_p10, before_p95,
				after_id, after_integrated, after_range, after_peak, after_p10, after_p95
			FROM recordings WHERE shelf_id = ? AND missing = 0 ORDER BY path`, shelfID)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("spines of shelf %d: %w", shelfID, err)
	}
	return list, nil
}
