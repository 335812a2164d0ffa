package store

import (
	"context"
	"database/sql"
	"errors"
	"fmt"
	"net/url"
	"os"
	"path/filepath"
	"runtime"
	"syscall"

	"github.com/mattn/go-sqlite3"
)

// Open opens or makes the database and brings its schema up to date: our migrations first, then River's.
//
// The file and a folder that has to be made are for the owner alone. A second program (or a second Open)
// on the same file is refused: jobs found "working" can only be given back to the queue because nobody
// else can be working on them.
func Open(ctx context.Context, o Options) (*Store, error) {
	path, err := filepath.Abs(o.Path)
	if err != nil || o.Path == "" {
		return nil, fmt.Errorf("open database %q: no path: %w", o.Path, ErrInvalid)
	}
	if err := os.MkdirAll(filepath.Dir(path), 0o700); err != nil {
		return nil, fmt.Errorf("open database %s: %w", path, err)
	}
	lock, err := lockBeside(path)
	if err != nil {
		return nil, err
	}
	s := &Store{lock: lock, changed: make(chan struct{})}
	if err := s.open(ctx, path); err != nil {
		for _, db := range []*sql.DB{s.reader, s.writer} {
			if db != nil {
				err = errors.Join(err, db.Close())
			}
		}
		return nil, errors.Join(fmt.Errorf("open database %s: %w", path, err), lock.Close())
	}
	return s, nil
}

func (s *Store) open(ctx context.Context, path string) error {
	// SQLite would make the file with the umask's mode; its -wal and -shm files take the mode of the file.
	f, err := os.OpenFile(path, os.O_RDWR|os.O_CREATE, 0o600)
	if err != nil {
		return err
	}
	if err := f.Close(); err != nil {
		return err
	}
	if s.writer, err = sql.Open(driver, dsn(path, writerSettings)); err != nil {
		return err
	}
	s.writer.SetMaxOpenConns(1)
	if err := migrate(ctx, s.writer); err != nil {
		return err
	}
	if s.reader, err = sql.Open(driver, dsn(path, readerSettings)); err != nil {
		return err
	}
	readers := max(4, runtime.GOMAXPROCS(0))
	s.reader.SetMaxOpenConns(readers)
	s.reader.SetMaxIdleConns(readers)
	return s.reader.PingContext(ctx)
}

// Settings belong in the data source name: a PRAGMA sent once to a pool reaches one of its connections.
//
// synchronous=FULL syncs at each commit, because files depend on rows: an original's place is taken as soon as
// the row that says where in the attic it is has been stored, and a power cut must not lose that row.
//
// txlock=immediate takes the write lock when a transaction begins. A deferred one that reads first and
// writes later fails at once, whatever the busy timeout, if anybody wrote in between.
var (
	writerSettings = url.Values{
		"_journal_mode": {"WAL"},
		"_foreign_keys": {"on"},
		"_busy_timeout": {"5000"}, // ms; only a person with another tool can hold the lock
		"_synchronous":  {"FULL"},
		"_txlock":       {"immediate"},
		"_cache_size":   {"-64000"}, // KiB, most of what a first scan of 100,000 recordings touches
	}
	readerSettings = url.Values{
		"mode":          {"ro"},
		"_query_only":   {"on"},
		"_busy_timeout": {"5000"},
		"_cache_size":   {"-16000"},
	}
)

// driver is SQLite's with the one setting that has no place in a data source name. Statement journals stay
// in memory: once one has grown past 64 KiB, SQLite would write each page a statement touches to a
// temporary file as well, which made the first scan of 100,000 recordings take twice as long.
const driver = "evenshelf-sqlite3"

func init() {
	sql.Register(driver, &sqlite3.SQLiteDriver{ConnectHook: func(c *sqlite3.SQLiteConn) error {
		_, err := c.Exec(`PRAGMA temp_store = MEMORY`, nil)
		return err
	}})
}

// dsn builds a file: URI, in which a path may hold any character.
func dsn(path string, settings url.Values) string {
	return (&url.URL{Scheme: "file", OmitHost: true, Path: path, RawQuery: settings.Encode()}).String()
}

// lockBeside takes an exclusive lock on path.lock, which the system gives back when the program ends,
// however it ends. The lock file stays: removing it would let two programs lock two files of one name.
func lockBeside(path string) (*os.File, error) {
	name := path + ".lock"
	f, err := os.OpenFile(name, os.O_RDWR|os.O_CREATE, 0o600)
	if err != nil {
		return nil, fmt.Errorf("open database %s: %w", path, err)
	}
	if err := syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB); err != nil {
		f.Close()
		if errors.Is(err, syscall.EWOULDBLOCK) {
			return nil, fmt.Errorf("open database %s: another program has it open (lock file %s): %w", path, name, ErrState)
		}
		return nil, fmt.Errorf("open database %s: lock %s: %w", path, name, err)
	}
	return f, nil
}
