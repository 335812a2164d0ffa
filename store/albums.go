package store

import (
	"context"
	"database/sql"
	"fmt"
	"strings"
)

// AlbumKey is what the recordings of one album have in common, whatever the case of its title and artist; "" if there
// is no title.
func AlbumKey(title, artist string) string {
	title = strings.TrimSpace(fold(title))
	if title == "" {
		return ""
	}
	return title + "\n" + strings.TrimSpace(fold(artist))
}

// Album returns a recording's album as KeepAlbums was told it; "" if it has none or none was read yet.
func (s *Store) Album(ctx context.Context, recordingID int64) (key string, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		key, err = one(ctx, tx, func(row scanner) (k string, err error) { return k, row.Scan(&k) },
			fmt.Sprintf("recording %d", recordingID), `SELECT coalesce(album, '') FROM recordings WHERE id = ?`, recordingID)
		return err
	})
	return key, err
}

// AlbumsUnread returns the recordings of a shelf whose album has not been read since their file changed, in path order,
// those missing from the disk left out.
func (s *Store) AlbumsUnread(ctx context.Context, shelfID int64) (list []Recording, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		list, err = collect(ctx, tx, scanRecording, `SELECT `+recordingColumns+` FROM recordings
			WHERE shelf_id = ? AND missing = 0 AND album IS NULL ORDER BY path`, shelfID)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("albums of shelf %d: %w", shelfID, err)
	}
	return list, nil
}

// KeepAlbums stores which album recordings are of, by their ids.
func (s *Store) KeepAlbums(ctx context.Context, keys map[int64]string) error {
	err := s.write(ctx, func(tx *sql.Tx) error {
		for id, key := range keys {
			if _, err := tx.ExecContext(ctx, `UPDATE recordings SET album = ? WHERE id = ?`, key, id); err != nil {
				return err
			}
		}
		return nil
	})
	if err != nil {
		return fmt.Errorf("keep albums: %w", err)
	}
	return nil
}

// AlbumMembers is Members for an album.
func (s *Store) AlbumMembers(ctx context.Context, runID int64, key string) (list []Recording, err error) {
	err = s.read(ctx, func(tx *sql.Tx) error {
		run, err := findRun(ctx, tx, runID)
		if err != nil {
			return err
		}
		list, err = collect(ctx, tx, scanRecording, `SELECT `+recordingColumns+` FROM recordings
			WHERE shelf_id = ? AND album = ? AND album <> '' AND missing = 0 ORDER BY path`, run.ShelfID, key)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("recordings of an album in run %d: %w", runID, err)
	}
	return list, nil
}
