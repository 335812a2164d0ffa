package store

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"syscall"
)

var shelfName = regexp.MustCompile(`^[a-z0-9][a-z0-9-]{0,39}$`)

// AddShelf registers a folder tree. Root must be an existing absolute folder; its symbolic links are
// resolved, as are those of the part of Copies that exists. Copies must not overlap any shelf's recordings,
// or the next scan would take delivered copies for recordings, nor another shelf's copies, or two
// recordings of one path would be delivered to one file.
func (s *Store) AddShelf(ctx context.Context, sh Shelf) (Shelf, error) {
	fail := func(err error) (Shelf, error) { return Shelf{}, fmt.Errorf("add shelf %q: %w", sh.Name, err) }
	if !shelfName.MatchString(sh.Name) {
		return fail(fmt.Errorf("the name is not 1 to 40 of a-z, 0-9 and -: %w", ErrInvalid))
	}
	var err error
	if sh.Root, err = resolveRoot(sh.Root); err != nil {
		return fail(err)
	}
	if sh.Copies, err = resolveCopies(sh.Copies); err != nil {
		return fail(err)
	}
	if overlap(sh.Root, sh.Copies) || overlap(sh.Root, sh.Attic()) {
		return fail(fmt.Errorf("the copies folder %s, the attic beside it and the recordings in %s must be apart: %w", sh.Copies, sh.Root, ErrInvalid))
	}
	at := now()
	err = s.write(ctx, func(tx *sql.Tx) error {
		others, err := collect(ctx, tx, scanShelf, `SELECT `+shelfColumns+` FROM shelves`)
		if err != nil {
			return err
		}
		for _, other := range others {
			if err := sh.clash(other); err != nil {
				return err
			}
		}
		sh.ID, err = one(ctx, tx, scanID, "id", `INSERT INTO shelves (name, root, copies, created_at) VALUES (?, ?, ?, ?) RETURNING id`,
			sh.Name, sh.Root, sh.Copies, at)
		return err
	})
	if err != nil {
		return fail(err)
	}
	sh.CreatedAt = fromMillis(at)
	return sh, nil
}

func (sh Shelf) clash(other Shelf) error {
	switch {
	case sh.Name == other.Name:
		return fmt.Errorf("the name is taken: %w", ErrExists)
	case sh.Root == other.Root:
		return fmt.Errorf("%s is the root of shelf %q: %w", sh.Root, other.Name, ErrExists)
	case overlap(sh.Copies, other.Copies) || overlap(sh.Copies, other.Attic()) || overlap(sh.Attic(), other.Copies):
		return fmt.Errorf("the copies folder %s overlaps that of shelf %q: %w", sh.Copies, other.Name, ErrExists)
	case overlap(sh.Copies, other.Root) || overlap(sh.Attic(), other.Root):
		return fmt.Errorf("the copies folder %s overlaps the recordings of shelf %q: %w", sh.Copies, other.Name, ErrInvalid)
	case overlap(sh.Root, other.Copies) || overlap(sh.Root, other.Attic()):
		return fmt.Errorf("%s overlaps the copies folder of shelf %q: %w", sh.Root, other.Name, ErrInvalid)
	}
	return nil
}

// overlap reports whether two clean absolute folders are the same or one is inside the other.
func overlap(a, b string) bool { return inside(a, b) || inside(b, a) }

func inside(folder, path string) bool {
	return path == folder || strings.HasPrefix(path, strings.TrimSuffix(folder, "/")+"/")
}

func resolveRoot(root string) (string, error) {
	if !filepath.IsAbs(root) {
		return "", fmt.Errorf("the root %q is not an absolute path: %w", root, ErrInvalid)
	}
	real, err := filepath.EvalSymlinks(root)
	var info os.FileInfo
	if err == nil {
		info, err = os.Stat(real)
	}
	var failed *fs.PathError
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return "", fmt.Errorf("there is no folder %s: %w", root, ErrInvalid)
	case errors.As(err, &failed):
		return "", fmt.Errorf("the folder %s cannot be opened: %w: %w", root, failed.Err, ErrInvalid)
	case err != nil:
		return "", fmt.Errorf("the folder %s cannot be opened: %w: %w", root, err, ErrInvalid)
	}
	if !info.IsDir() {
		return "", fmt.Errorf("the root %s is not a folder: %w", real, ErrInvalid)
	}
	return real, nil
}

// resolveCopies resolves symbolic links in the part of the path that exists; the rest is made later.
func resolveCopies(copies string) (string, error) {
	if !filepath.IsAbs(copies) {
		return "", fmt.Errorf("the copies folder %q is not an absolute path: %w", copies, ErrInvalid)
	}
	have, rest := filepath.Clean(copies), ""
	for {
		real, err := filepath.EvalSymlinks(have)
		if err == nil {
			info, err := os.Stat(real)
			if err != nil {
				return "", fmt.Errorf("the copies folder: %w: %w", err, ErrInvalid)
			}
			if !info.IsDir() {
				return "", fmt.Errorf("the copies folder %s: %s is not a folder: %w", copies, real, ErrInvalid)
			}
			return filepath.Join(real, rest), nil
		}
		dangling := false
		if _, lerr := os.Lstat(have); lerr == nil {
			dangling = true // a link to nowhere: what it will lead to cannot be known
		}
		if dangling || !errors.Is(err, os.ErrNotExist) && !errors.Is(err, syscall.ENOTDIR) {
			return "", fmt.Errorf("the copies folder: %w: %w", err, ErrInvalid)
		}
		have, rest = filepath.Dir(have), filepath.Join(filepath.Base(have), rest)
	}
}

const shelfColumns = `id, name, root, copies, created_at`

func scanShelf(row scanner) (sh Shelf, err error) {
	var created int64
	err = row.Scan(&sh.ID, &sh.Name, &sh.Root, &sh.Copies, &created)
	sh.CreatedAt = fromMillis(created)
	return sh, err
}

func findShelf(ctx context.Context, tx *sql.Tx, id int64) (Shelf, error) {
	return one(ctx, tx, scanShelf, fmt.Sprintf("shelf %d", id), `SELECT `+shelfColumns+` FROM shelves WHERE id = ?`, id)
}

// ShelfNamed returns the shelf of that name.
func (s *Store) ShelfNamed(ctx context.Context, name string) (sh Shelf, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		sh, err = one(ctx, tx, scanShelf, fmt.Sprintf("shelf %q", name), `SELECT `+shelfColumns+` FROM shelves WHERE name = ?`, name)
		return err
	})
	return sh, err
}

// Shelf returns one shelf with its summary.
func (s *Store) Shelf(ctx context.Context, id int64) (sum ShelfSummary, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		shelf, err := findShelf(ctx, tx, id)
		if err != nil {
			return err
		}
		sum, err = summarise(ctx, tx, shelf)
		return err
	})
	return sum, err
}

// Shelves returns all shelves by name, each with its summary.
func (s *Store) Shelves(ctx context.Context) (list []ShelfSummary, err error) {
	list = []ShelfSummary{}
	err = s.read(ctx, func(tx *sql.Tx) error {
		shelves, err := collect(ctx, tx, scanShelf, `SELECT `+shelfColumns+` FROM shelves ORDER BY name`)
		if err != nil {
			return err
		}
		for _, shelf := range shelves {
			sum, err := summarise(ctx, tx, shelf)
			if err != nil {
				return err
			}
			list = append(list, sum)
		}
		return nil
	})
	return list, err
}

// summarise leaves out recordings that are missing from the disk: it tells what is there.
func summarise(ctx context.Context, tx *sql.Tx, shelf Shelf) (ShelfSummary, error) {
	sum := ShelfSummary{Shelf: shelf}
	err := tx.QueryRowContext(ctx, `
		SELECT count(*), coalesce(sum(duration), 0), count(before_id),
			count(*) FILTER (WHERE levelled = 'done'),
			count(*) FILTER (WHERE state = 'held'),
			count(*) FILTER (WHERE state = 'failed'),
			min(before_integrated), max(before_integrated),
			min(after_integrated) FILTER (WHERE levelled = 'done'),
			max(after_integrated) FILTER (WHERE levelled = 'done'),
			max(after_peak) FILTER (WHERE levelled = 'done')
		FROM recordings WHERE shelf_id = ? AND missing = 0`, shelf.ID).Scan(
		&sum.Recordings, &sum.Duration, &sum.Measured, &sum.Done, &sum.Held, &sum.Failed,
		&sum.Quietest, &sum.Loudest, &sum.QuietestAfter, &sum.LoudestAfter, &sum.HighestPeak)
	if err != nil {
		return sum, fmt.Errorf("summary of shelf %q: %w", shelf.Name, err)
	}
	runs, err := collect(ctx, tx, scanRun, runQuery+` WHERE r.shelf_id = ? ORDER BY r.id DESC LIMIT 1`, shelf.ID)
	if err != nil {
		return sum, fmt.Errorf("last run of shelf %q: %w", shelf.Name, err)
	}
	if len(runs) == 1 {
		sum.LastRun = &runs[0]
	}
	return sum, nil
}

// HeldCount counts the recordings that wait for a person, those missing from the disk included.
func (s *Store) HeldCount(ctx context.Context) (n int, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		return tx.QueryRowContext(ctx, `SELECT coalesce(sum(
			(SELECT count(*) FROM recordings WHERE shelf_id = shelves.id AND state = 'held')), 0) FROM shelves`).Scan(&n)
	})
	return n, err
}
