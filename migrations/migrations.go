// Package migrations holds the database schema as numbered goose files, embedded in the binary.
//
// A shipped file never changes: a new need is a new file, with a way up and a way down. River's own
// tables (river_…) are not here; River brings their migrations itself, and store.Open runs them after ours.
package migrations

import (
	"embed"
	"io/fs"
)

//go:embed sqlite/*.sql
var files embed.FS

// SQLite holds the files for SQLite at its top, as goose wants them.
var SQLite = mustSub("sqlite")

func mustSub(folder string) fs.FS {
	sub, err := fs.Sub(files, folder)
	if err != nil {
		panic(err) // only for a folder name that is not a valid path
	}
	return sub
}
