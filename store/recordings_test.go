package store

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
)

// populate writes rows straight into the table: states and figures with many ties and many gaps.
func (f *fixture) populate(n int) {
	f.t.Helper()
	rng := rand.New(rand.NewPCG(1, 2))
	tx, err := f.writer.Begin()
	if err != nil {
		f.t.Fatal(err)
	}
	defer tx.Rollback()
	stmt, err := tx.Prepare(`INSERT INTO recordings (shelf_id, path, folded, size, modified_at, added_at, state, duration,
		before_id, before_integrated, before_range, before_peak, before_p10, before_p95, after_id, after_integrated, after_peak, after_p10, after_p95)
		VALUES (?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?, ?)`)
	if err != nil {
		f.t.Fatal(err)
	}
	if _, err := tx.Exec(`PRAGMA defer_foreign_keys = on`); err != nil {
		f.t.Fatal(err)
	}
	states := []string{"", "waiting", "done", "done", "done", "held", "failed"}
	for i, p := range numbered(n) {
		args := []any{f.shelf.ID, p, fold(p), rng.IntN(1e6), 0, 1000 + rng.IntN(50), states[rng.IntN(len(states))]}
		if rng.IntN(3) == 0 { // never measured
			args = append(args, slices.Repeat([]any{nil}, 12)...)
		} else {
			level := func(from, steps int) any {
				if rng.IntN(5) == 0 {
					return nil // measured, but not defined
				}
				return float64(-from) + float64(rng.IntN(steps))/7 // sevenths: not exact in binary
			}
			args = append(args, level(-10, 900), i+1, level(40, 200), level(0, 50), level(10, 80), -30.0, -20.0, i+1, level(24, 5), -1.0, -19.0, -17.0)
		}
		if _, err := stmt.Exec(args...); err != nil {
			f.t.Fatal(err)
		}
	}
	// The rows point at readings; one stands in for each.
	if _, err := tx.Exec(`INSERT INTO profiles VALUES ('v', 'rotation', -18, '{}', 0);
		INSERT INTO runs (shelf_id, folder, profile_version, delivery, created_at) VALUES (?, '', 'v', 'measure', 0)`, f.shelf.ID); err != nil {
		f.t.Fatal(err)
	}
	if _, err := tx.Exec(`INSERT INTO jobs (id, run_id, recording_id, bytes) SELECT id, (SELECT max(id) FROM runs), id, size FROM recordings`); err != nil {
		f.t.Fatal(err)
	}
	if _, err := tx.Exec(`INSERT INTO readings (id, recording_id, job_id, kind, measured_at, engine, decoder, detail)
		SELECT id, id, id, 'before', 0, '', '', '{}' FROM recordings`); err != nil {
		f.t.Fatal(err)
	}
	if err := tx.Commit(); err != nil {
		f.t.Fatal(err)
	}
}

// valueOf is the test's own idea of what each order goes by.
func valueOf(sort string, r Recording) (number *float64, text string) {
	pick := func(f *Figures, get func(*Figures) *float64) *float64 {
		if f == nil {
			return nil
		}
		return get(f)
	}
	switch sort {
	case "path":
		return new(float64), r.Path
	case "state":
		return new(float64), string(r.State)
	case "added":
		v := float64(r.AddedAt.UnixMilli())
		return &v, ""
	case "duration":
		return r.Duration, ""
	case "before":
		return pick(r.Before, func(f *Figures) *float64 { return f.Integrated }), ""
	case "after":
		return pick(r.After, func(f *Figures) *float64 { return f.Integrated }), ""
	case "range":
		return pick(r.Before, func(f *Figures) *float64 { return f.Range }), ""
	case "peak":
		return pick(r.Before, func(f *Figures) *float64 { return f.TruePeak }), ""
	}
	panic(sort)
}

func TestPagingEverySort(t *testing.T) {
	const n = 10_000
	f := open(t)
	f.populate(n)
	for _, sort := range []string{"path", "added", "state", "duration", "before", "after", "range", "peak"} {
		for _, desc := range []bool{false, true} {
			for _, shelf := range []int64{0, f.shelf.ID} {
				t.Run(fmt.Sprintf("%s desc=%v shelf=%d", sort, desc, shelf), func(t *testing.T) {
					q := RecordingQuery{ShelfID: shelf, Sort: sort, Desc: desc, Limit: 777} // does not divide n
					seen := make(map[int64]bool, n)
					var last *Recording
					for pages := 0; ; pages++ {
						page, err := f.Recordings(f.ctx, q)
						if err != nil {
							t.Fatal(err)
						}
						if page.Total != n {
							t.Fatalf("total %d", page.Total)
						}
						for i := range page.Recordings {
							r := &page.Recordings[i]
							if seen[r.ID] {
								t.Fatalf("recording %d came twice", r.ID)
							}
							seen[r.ID] = true
							if last != nil && !inOrder(sort, desc, *last, *r) {
								t.Fatalf("%+v before %+v", *last, *r)
							}
							last = r
						}
						if page.Next == "" {
							break
						}
						if len(page.Recordings) != q.Limit || pages > n/q.Limit {
							t.Fatalf("page %d has %d rows and there is another", pages, len(page.Recordings))
						}
						q.Cursor = page.Next
					}
					if len(seen) != n {
						t.Errorf("%d of %d rows came", len(seen), n)
					}
				})
			}
		}
	}
}

// Each order, each way, both halves of the list: SQLite must find the rows in an index, in order, without
// sorting them. This is what makes a page of 100,000 as quick as one of 100, and unlike a stopwatch it does
// not depend on the machine.
func TestPagesComeFromAnIndex(t *testing.T) {
	f := open(t)
	explain := func(query string, args ...any) (plan string) {
		t.Helper()
		err := f.read(f.ctx, func(tx *Tx) error {
			steps, err := collect(f.ctx, tx, func(row scanner) (detail string, err error) {
				var n int
				return detail, row.Scan(&n, &n, &n, &detail)
			}, `EXPLAIN QUERY PLAN `+query, args...)
			plan = strings.Join(steps, "\n")
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
		return plan
	}
	for sort, key := range sortKeys {
		for _, way := range []string{"ASC", "DESC"} {
			for _, half := range []struct{ term, order string }{
				{key.column + " IS NOT NULL", key.column + " " + way + ", id " + way}, {key.column + " IS NULL", "id " + way},
			} {
				if key.always && strings.HasSuffix(half.term, "IS NULL") {
					continue // never asked
				}
				w := conditions{}
				w.add(half.term)
				query, args := perShelf([]int64{f.shelf.ID}, w, " ORDER BY "+half.order+" LIMIT 100")
				if plan := explain(query, args...); strings.Contains(plan, "TEMP B-TREE") || !strings.Contains(plan, "USING INDEX") {
					t.Errorf("%s %s, %s:\n%s", sort, way, half.term, plan)
				}
			}
		}
	}
	for what, query := range map[string]string{
		"state in path order": `SELECT * FROM recordings WHERE shelf_id = 1 AND state = 'held' AND path IS NOT NULL ORDER BY path, id LIMIT 100`,
		"events of a run":     `SELECT * FROM history WHERE run_id = 1 AND run_id <> 0 AND id > 5 ORDER BY id LIMIT 100`,
		"history":             `SELECT * FROM history WHERE recording_id = 1 AND recording_id <> 0 ORDER BY id`,
		"jobs of a run":       `SELECT * FROM jobs WHERE run_id = 1 AND state = 'failed' AND id > 5 ORDER BY id LIMIT 100`,
	} {
		if plan := explain(query); strings.Contains(plan, "TEMP B-TREE") || strings.Contains(plan, "SCAN") {
			t.Errorf("%s:\n%s", what, plan)
		}
	}
}

func inOrder(sort string, desc bool, a, b Recording) bool {
	an, at := valueOf(sort, a)
	bn, bt := valueOf(sort, b)
	if (an == nil) != (bn == nil) {
		return bn == nil // those without come last in both directions
	}
	order := cmp.Compare(a.ID, b.ID)
	if an != nil {
		order = cmp.Or(cmp.Compare(*an, *bn), cmp.Compare(at, bt), order)
	}
	if desc {
		order = -order
	}
	return order < 0
}

// A page must end exactly with the list, and the last page must not promise another.
func TestPagingEnds(t *testing.T) {
	f := open(t)
	f.found("a.wav", "b.wav", "c.wav", "d.wav")
	for limit, pages := range map[int]int{1: 4, 2: 2, 3: 2, 4: 1, 5: 1} {
		for _, sort := range []string{"path", "before"} { // with a value everywhere, and nowhere
			q, n := RecordingQuery{Sort: sort, Limit: limit}, 0
			for {
				page, err := f.Recordings(f.ctx, q)
				if err != nil {
					t.Fatal(err)
				}
				n++
				if q.Cursor = page.Next; q.Cursor == "" {
					break
				}
			}
			if n != pages {
				t.Errorf("limit %d, %s: %d pages, want %d", limit, sort, n, pages)
			}
		}
	}
	empty, err := f.Recordings(f.ctx, RecordingQuery{Search: "zz"})
	if err != nil || empty.Recordings == nil || len(empty.Recordings) != 0 || empty.Next != "" || empty.Total != 0 {
		t.Errorf("empty page: %+v %v", empty, err)
	}
}

func TestRecordingFilters(t *testing.T) {
	f := open(t)
	m := f.found("a.wav", "a/x.wav", "a/y/z.wav", "ab/x.wav", "A/Ärger.wav", "b/100%_sure.wav", "b/100x sure.wav", "b/stra\u00dfe.wav", "b/u\u0308ber.wav", "b/back\\slash*?[.wav")
	other := f.addShelf("other")
	if _, err := f.Found(f.ctx, other.ID, "", files("a/x.wav")); err != nil {
		t.Fatal(err)
	}
	var taken []int64
	run, err := f.CreateRun(f.ctx, NewRun{ShelfID: f.shelf.ID, Folder: "a", Profile: someProfile(t), Delivery: Measure},
		func(_ context.Context, _ *Tx, ids []int64) error { taken = ids; return nil })
	if err != nil || len(taken) != 2 {
		t.Fatal(taken, err)
	}
	f.start(taken[0])
	f.finish(taken[0], failed("unreadable"), "")
	for _, c := range []struct {
		what string
		q    RecordingQuery
		want []string
	}{
		{"folder", RecordingQuery{Folder: "a"}, []string{"a/x.wav", "a/y/z.wav"}},
		{"deeper folder", RecordingQuery{Folder: "a/y"}, []string{"a/y/z.wav"}},
		{"a file is no folder", RecordingQuery{Folder: "a.wav"}, nil},
		{"run", RecordingQuery{RunID: run.ID}, []string{"a/x.wav", "a/y/z.wav"}},
		{"run and state", RecordingQuery{RunID: run.ID, State: Failed}, []string{"a/x.wav"}},
		{"waiting", RecordingQuery{State: Waiting}, []string{"a/y/z.wav"}},
		{"never", RecordingQuery{State: Never, Folder: "ab"}, []string{"ab/x.wav"}},
		{"any case", RecordingQuery{Search: "X.WAV"}, []string{"a/x.wav", "ab/x.wav"}},
		{"any case beyond ASCII", RecordingQuery{Search: "äRGER"}, []string{"A/Ärger.wav"}},
		{"full folding", RecordingQuery{Search: "STRASSE"}, []string{"b/stra\u00dfe.wav"}},
		{"composed finds decomposed", RecordingQuery{Search: "\u00dcber"}, []string{"b/u\u0308ber.wav"}},
		{"no wildcards", RecordingQuery{Search: "100%_"}, []string{"b/100%_sure.wav"}},
		{"underscore", RecordingQuery{Search: "_"}, []string{"b/100%_sure.wav"}},
		{"backslash and brackets", RecordingQuery{Search: "\\slash*?["}, []string{"b/back\\slash*?[.wav"}},
		{"quote", RecordingQuery{Search: "' OR 1=1 --"}, nil},
	} {
		c.q.ShelfID = f.shelf.ID
		page, err := f.Recordings(f.ctx, c.q)
		if err != nil {
			t.Errorf("%s: %v", c.what, err)
			continue
		}
		var got []string
		for _, r := range page.Recordings {
			got = append(got, r.Path)
		}
		if !slices.Equal(got, c.want) || page.Total != len(c.want) {
			t.Errorf("%s: %q (total %d), want %q", c.what, got, page.Total, c.want)
		}
	}
	if r, err := f.Recording(f.ctx, m["a/x.wav"].ID); err != nil || r.ShelfName != "music" || r.Reason != "unreadable" || !r.ModifiedAt.Equal(someTime) {
		t.Errorf("recording: %+v %v", r, err)
	}
}

func TestRecordingQueryRefuses(t *testing.T) {
	f := open(t)
	f.found("a.wav", "b.wav")
	page, err := f.Recordings(f.ctx, RecordingQuery{Limit: 1})
	if err != nil || page.Next == "" {
		t.Fatal(page, err)
	}
	for what, q := range map[string]RecordingQuery{
		"unknown order":           {Sort: "id; DROP TABLE recordings"},
		"unknown state":           {State: "lost"},
		"folder outside":          {Folder: "../x"},
		"limit":                   {Limit: 1001},
		"negative limit":          {Limit: -1},
		"cursor of another order": {Cursor: page.Next, Sort: "before"},
		"cursor of another way":   {Cursor: page.Next, Desc: true},
		"broken cursor":           {Cursor: page.Next[1:]},
		"no cursor at all":        {Cursor: "%%%"},
	} {
		if _, err := f.Recordings(f.ctx, q); !errors.Is(err, ErrInvalid) {
			t.Errorf("%s: %v", what, err)
		}
	}
}
