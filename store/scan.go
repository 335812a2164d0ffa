package store

import (
	"context"
	"database/sql"
	"fmt"
	"path"
	"strings"
	"unicode/utf8"

	"golang.org/x/text/cases"
	"golang.org/x/text/unicode/norm"
)

// Found records what a scan of folder (""=whole shelf) came across: new recordings are added, recordings
// of another size or time are marked as changed and lose their figures, and known recordings that were
// not come across are marked as missing, keeping everything else.
func (s *Store) Found(ctx context.Context, shelfID int64, folder string, files []FoundFile) (ScanResult, error) {
	return s.FoundPartly(ctx, shelfID, folder, files, nil)
}

// FoundPartly is Found for a scan that could not look into some folders (relative to the root, "" for the
// root itself). What is known below them is left as it is, so that a locked folder does not empty a shelf.
func (s *Store) FoundPartly(ctx context.Context, shelfID int64, folder string, files []FoundFile, unread []string) (res ScanResult, err error) {
	fail := func(err error) (ScanResult, error) {
		return ScanResult{}, fmt.Errorf("scan of shelf %d: %w", shelfID, err)
	}
	if err := checkFolder(folder); err != nil {
		return fail(err)
	}
	found := make(map[string]FoundFile, len(files))
	for _, f := range files {
		if !validPath(f.Path) || !under(folder, f.Path) {
			return fail(fmt.Errorf("path %q is not a path below folder %q: %w", f.Path, folder, ErrInvalid))
		}
		found[f.Path] = f
	}
	res.Found, res.Unread = len(found), unread
	err = s.write(ctx, func(tx *sql.Tx) error {
		if _, err := findShelf(ctx, tx, shelfID); err != nil {
			return err
		}
		// The driver starts a goroutine for each statement that can be cancelled: too dear a million times.
		// The transaction itself still ends when the caller's context does.
		ctx := context.WithoutCancel(ctx)
		diff, err := newScanDiff(ctx, tx, shelfID)
		if err != nil {
			return err
		}
		defer diff.close()
		known, err := knownFiles(ctx, tx, shelfID, folder)
		if err != nil {
			return err
		}
		have := make(map[string]bool, len(known))
		for _, k := range known {
			have[k.path] = true
		}
		moved := movedFiles(known, have, files, found, unread)
		for _, k := range known {
			if to, ok := moved[k.path]; ok {
				res.Moved++
				have[to] = true
				if err := diff.follow(ctx, k, found[to]); err != nil {
					return err
				}
				continue
			}
			f, here := found[k.path]
			switch {
			case !here && !k.missing && !underAny(unread, k.path):
				res.Missing++
				err = diff.mark(ctx, diff.gone, k, "missing", "no longer there")
			case here && (f.Size != k.size || f.ModifiedAt.UnixMilli() != k.modified):
				res.Changed++
				err = diff.change(ctx, k, f)
			case here && k.missing:
				err = diff.mark(ctx, diff.back, k, "found", "there again")
			}
			if err == nil && here && f.Inode != 0 && int64(f.Inode) != k.inode {
				_, err = diff.place.ExecContext(ctx, int64(f.Inode), k.id)
			}
			if err != nil {
				return err
			}
		}
		for _, f := range files { // in the order of the walk, so that ids follow it
			if have[f.Path] {
				continue
			}
			have[f.Path] = true
			res.Added++
			if err := diff.add(ctx, found[f.Path]); err != nil {
				return err
			}
		}
		return nil
	})
	if err != nil {
		return fail(err)
	}
	return res, nil
}

type knownFile struct {
	id       int64
	path     string
	size     int64
	modified int64
	missing  bool
	inode    int64
}

func knownFiles(ctx context.Context, tx *sql.Tx, shelfID int64, folder string) ([]knownFile, error) {
	w := conditions{}
	w.add("shelf_id = ?", shelfID)
	w.folder("path", folder)
	return collect(ctx, tx, func(row scanner) (k knownFile, err error) {
		return k, row.Scan(&k.id, &k.path, &k.size, &k.modified, &k.missing, &k.inode)
	}, `SELECT id, path, size, modified_at, missing, inode FROM recordings`+w.where()+` ORDER BY path`, w.args...)
}

// scanDiff holds the prepared statements of one scan: a first one adds 100,000 rows.
type scanDiff struct {
	shelfID                                        int64
	at                                             int64
	insert, gone, back, differ, move, place, event *sql.Stmt
	all                                            []*sql.Stmt
}

func newScanDiff(ctx context.Context, tx *sql.Tx, shelfID int64) (*scanDiff, error) {
	d := &scanDiff{shelfID: shelfID, at: now()}
	for _, p := range []struct {
		stmt  **sql.Stmt
		query string
	}{
		{&d.insert, `INSERT INTO recordings (shelf_id, path, folded, size, modified_at, added_at, inode) VALUES (?, ?, ?, ?, ?, ?, ?)`},
		{&d.gone, `UPDATE recordings SET missing = 1 WHERE id = ?`},
		{&d.back, `UPDATE recordings SET missing = 0 WHERE id = ?`},
		{&d.move, `UPDATE recordings SET path = ?, folded = ?, inode = ?, missing = 0 WHERE id = ?`},
		{&d.place, `UPDATE recordings SET inode = ? WHERE id = ?`},
		// A job that waits or is at work keeps its state: it will read the new file.
		{&d.differ, `UPDATE recordings SET size = ?, modified_at = ?, missing = 0,
			state = CASE WHEN state IN ('waiting', 'working') THEN state ELSE '' END,
			reason = '', levelled = '', levelled_reason = '', faults = 0, duration = NULL, format = '', album = NULL,
			before_id = NULL, before_integrated = NULL, before_range = NULL, before_peak = NULL, before_p10 = NULL, before_p95 = NULL,
			after_id = NULL, after_integrated = NULL, after_range = NULL, after_peak = NULL, after_p10 = NULL, after_p95 = NULL
			WHERE id = ?`},
		{&d.event, `INSERT INTO history (at, recording_id, what, words) VALUES (?, ?, ?, ?)`},
	} {
		stmt, err := tx.PrepareContext(ctx, p.query)
		if err != nil {
			d.close()
			return nil, err
		}
		*p.stmt = stmt
		d.all = append(d.all, stmt)
	}
	return d, nil
}

func (d *scanDiff) close() {
	for _, stmt := range d.all {
		stmt.Close()
	}
}

func (d *scanDiff) tell(ctx context.Context, id int64, what, words string) error {
	_, err := d.event.ExecContext(ctx, d.at, id, what, words)
	return err
}

func (d *scanDiff) mark(ctx context.Context, stmt *sql.Stmt, k knownFile, what, words string) error {
	if _, err := stmt.ExecContext(ctx, k.id); err != nil {
		return err
	}
	return d.tell(ctx, k.id, what, words)
}

func (d *scanDiff) follow(ctx context.Context, k knownFile, f FoundFile) error {
	if _, err := d.move.ExecContext(ctx, f.Path, fold(f.Path), int64(f.Inode), k.id); err != nil {
		return fmt.Errorf("move %q to %q: %w", k.path, f.Path, err)
	}
	return d.tell(ctx, k.id, "moved", movedFrom(k.path))
}

func (d *scanDiff) change(ctx context.Context, k knownFile, f FoundFile) error {
	if _, err := d.differ.ExecContext(ctx, f.Size, f.ModifiedAt.UnixMilli(), k.id); err != nil {
		return err
	}
	words := "another time of change; earlier readings are out of date"
	if f.Size != k.size {
		words = fmt.Sprintf("%d bytes instead of %d; earlier readings are out of date", f.Size, k.size)
	}
	return d.tell(ctx, k.id, "changed", words)
}

func (d *scanDiff) add(ctx context.Context, f FoundFile) error {
	added, err := d.insert.ExecContext(ctx, d.shelfID, f.Path, fold(f.Path), f.Size, f.ModifiedAt.UnixMilli(), d.at, int64(f.Inode))
	if err != nil {
		return fmt.Errorf("add %q: %w", f.Path, err)
	}
	id, err := added.LastInsertId() // not RETURNING, which makes SQLite keep a journal for each statement
	if err != nil {
		return fmt.Errorf("add %q: %w", f.Path, err)
	}
	return d.tell(ctx, id, "found", "new on the shelf")
}

// fold takes the case out of a text for searching, in any script, and composes accents, so that a name
// typed on one system finds the same name stored by another.
func fold(text string) string {
	for i := range len(text) {
		if text[i] >= utf8.RuneSelf {
			return norm.NFC.String(cases.Fold().String(text))
		}
	}
	return strings.ToLower(text) // the same for ASCII, and much faster
}

// validPath accepts relative, clean paths with forward slashes that stay below where they start. (Unlike
// fs.ValidPath it accepts names that are not UTF-8: they exist on disks.)
func validPath(p string) bool {
	return p != "" && p != "." && p != ".." && p[0] != '/' && path.Clean(p) == p &&
		!strings.HasPrefix(p, "../") && !strings.ContainsRune(p, 0)
}

func checkFolder(folder string) error {
	if folder != "" && !validPath(folder) {
		return fmt.Errorf("folder %q is not a path inside a shelf: %w", folder, ErrInvalid)
	}
	return nil
}

// under reports whether a path lies below a folder; "" is the root.
func under(folder, p string) bool { return folder == "" || strings.HasPrefix(p, folder+"/") }

func underAny(folders []string, p string) bool {
	for _, f := range folders {
		if under(f, p) {
			return true
		}
	}
	return false
}
