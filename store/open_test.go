package store

import (
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"

	"evenshelf/migrations"
)

func TestOpenMakesPrivateFiles(t *testing.T) {
	f := open(t)
	f.found("a.wav") // so that -wal and -shm exist
	for name, want := range map[string]os.FileMode{
		filepath.Dir(f.path): 0o700, f.path: 0o600, f.path + ".lock": 0o600, f.path + "-wal": 0o600, f.path + "-shm": 0o600,
	} {
		info, err := os.Stat(name)
		if err != nil {
			t.Error(err)
		} else if got := info.Mode().Perm(); got != want {
			t.Errorf("%s: mode %o, want %o", name, got, want)
		}
	}
}

func TestOpenRefusesASecondProgram(t *testing.T) {
	f := open(t)
	_, err := Open(f.ctx, Options{Path: f.path})
	if !errors.Is(err, ErrState) || !strings.Contains(err.Error(), f.path) {
		t.Errorf("second Open: %v, want ErrState naming the file", err)
	}
	if err := f.Close(); err != nil {
		t.Fatal(err)
	}
	f.reopen()
	if _, err := f.ShelfNamed(f.ctx, "music"); err != nil {
		t.Errorf("after reopening: %v", err)
	}
}

func TestOpenTakesAnyFileName(t *testing.T) {
	path := filepath.Join(t.TempDir(), "a ?b#c%20d&mode=ro", "é\nx.db")
	s, err := Open(t.Context(), Options{Path: path})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if _, err := os.Stat(path); err != nil {
		t.Error(err)
	}
}

func TestOpenSaysWhatIsWrong(t *testing.T) {
	dir := t.TempDir()
	text := filepath.Join(dir, "text.db")
	mustWrite(t, text, strings.Repeat("this is not a database\n", 100))
	for name, path := range map[string]string{"no path": "", "a folder": dir, "not a database": text, "below a file": filepath.Join(text, "x.db")} {
		s, err := Open(t.Context(), Options{Path: path})
		if err == nil {
			s.Close()
			t.Errorf("%s: no error", name)
		} else if !strings.Contains(err.Error(), path) {
			t.Errorf("%s: %q does not name the file", name, err)
		}
	}
}

// Settings must hold on every connection, not on the first one only.
func TestConnectionSettings(t *testing.T) {
	f := open(t)
	var journal string
	var foreign, sync int
	if err := f.writer.QueryRow("PRAGMA journal_mode").Scan(&journal); err != nil {
		t.Fatal(err)
	}
	if err := f.writer.QueryRow("PRAGMA foreign_keys").Scan(&foreign); err != nil {
		t.Fatal(err)
	}
	if err := f.writer.QueryRow("PRAGMA synchronous").Scan(&sync); err != nil {
		t.Fatal(err)
	}
	if journal != "wal" || foreign != 1 || sync != 2 { // 2 = FULL, sqlite.org/pragma.html
		t.Errorf("writer: journal %s, foreign keys %d, synchronous %d", journal, foreign, sync)
	}
	for range 4 {
		conn, err := f.reader.Conn(f.ctx)
		if err != nil {
			t.Fatal(err)
		}
		defer conn.Close() // held until the end, so that each one is another connection
		if _, err := conn.ExecContext(f.ctx, `DELETE FROM shelves`); err == nil {
			t.Error("a reading connection could write")
		}
	}
}

func TestMigrations(t *testing.T) {
	schema := func(f *fixture) string {
		f.t.Helper()
		var all string
		err := f.writer.QueryRow(`SELECT coalesce(group_concat(sql, ';' ORDER BY name), '') FROM sqlite_master
			WHERE name NOT LIKE 'river%' AND name NOT LIKE 'goose%' AND name NOT LIKE 'sqlite%'`).Scan(&all)
		if err != nil {
			f.t.Fatal(err)
		}
		return all
	}
	t.Run("up, down, up, with rows in every table", func(t *testing.T) {
		f := open(t)
		f.found("a.wav", "b/c.wav")
		_, jobs := f.run(Copy)
		f.start(jobs[0])
		f.finish(jobs[0], done(-30, -18), "a.wav")
		first := schema(f)
		ours, err := ourMigrations(f.writer, migrations.SQLite)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := ours.DownTo(f.ctx, 0); err != nil {
			t.Fatal(err)
		}
		if left := schema(f); left != "" {
			t.Errorf("down leaves %s", left)
		}
		if _, err := ours.Up(f.ctx); err != nil {
			t.Fatal(err)
		}
		if again := schema(f); again != first {
			t.Errorf("up after down gives another schema:\n%s\nwant\n%s", again, first)
		}
	})
	t.Run("4: up and down over rows of before", func(t *testing.T) {
		f := open(t)
		f.found("a.wav")
		var ids []int64
		for _, d := range []Delivery{Measure, Copy, Replace, Tags} {
			run, jobs := f.run(d)
			ids = append(ids, run.ID)
			f.start(jobs[0])
			f.finish(jobs[0], sounding("before", "after"), "a.wav")
		}
		list := files("b.wav")
		list[0].Inode = 5
		f.scan("", list[:0])
		f.exec(`INSERT INTO history (at, recording_id, what, words) VALUES (1, 1, 'moved', 'here')`)
		before := f.texts(`SELECT what || words FROM history ORDER BY id`)
		ours, err := ourMigrations(f.writer, migrations.SQLite)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := ours.DownTo(f.ctx, 3); err != nil {
			t.Fatal(err)
		}
		if got := f.texts(`SELECT delivery FROM runs ORDER BY id`); !slices.Equal(got, []string{"measure", "copy", "replace", "replace"}) {
			t.Errorf("down: %q", got)
		}
		f.exec(`UPDATE readings SET detail = json_remove(detail, '$.audio_hash') WHERE kind = 'before'`) // as an older engine left them
		if _, err := ours.Up(f.ctx); err != nil {
			t.Fatal(err)
		}
		if got := f.texts(`SELECT DISTINCT audio_hash FROM readings ORDER BY kind`); !slices.Equal(got, []string{"after", ""}) {
			t.Errorf("hashes: %q", got)
		}
		after := f.texts(`SELECT what || words FROM history ORDER BY id`)
		if len(after) != len(before) || !slices.Equal(after[:len(after)-1], before[:len(before)-1]) || after[len(after)-1] != "foundhere" {
			t.Errorf("history %q, was %q", after, before)
		}
		for i, want := range []Delivery{Measure, Copy, Replace, Replace} {
			if got := f.getRun(ids[i]); got.Delivery != want || got.Done != 1 {
				t.Errorf("%+v", got)
			}
		}
		if list, err := f.Levelled(f.ctx, f.shelf.ID, 0, "after"); err != nil || len(list) != 3 {
			t.Errorf("%+v %v", list, err)
		}
	})
	t.Run("5: down forgets versions and keeps originals", func(t *testing.T) {
		f := open(t)
		rec := f.found("a.wav")["a.wav"]
		_, jobs := f.run(Replace)
		o := Original{RecordingID: rec.ID, JobID: jobs[0], SHA256: strings.Repeat("a", 64), Levelled: strings.Repeat("f", 64), Stored: "a.wav", Size: 5, Length: 7}
		v := o
		v.SHA256, v.Stored = strings.Repeat("b", 64), "b.wav"
		if err := f.KeepOriginal(f.ctx, o, v, v); err != nil { // twice, as after an attempt that was cut short
			t.Fatal(err)
		}
		if got := f.texts(`SELECT kind || stored || length FROM attic ORDER BY sha256`); !slices.Equal(got, []string{"originala.wav7", "versionb.wav7"}) {
			t.Errorf("%q", got)
		}
		if got := f.texts(`SELECT words FROM history WHERE what = 'changed'`); len(got) != 1 {
			t.Errorf("history: %q", got)
		}
		ours, err := ourMigrations(f.writer, migrations.SQLite)
		if err != nil {
			t.Fatal(err)
		}
		if _, err := ours.DownTo(f.ctx, 4); err != nil {
			t.Fatal(err)
		}
		if _, err := ours.Up(f.ctx); err != nil {
			t.Fatal(err)
		}
		if all, err := f.AtticOf(f.ctx, f.shelf.ID); err != nil || all != (AtticCount{Originals: 1, Bytes: 5}) { // of what took its place
			t.Errorf("%+v %v", all, err)
		}
	})
	t.Run("up from a populated database keeps it", func(t *testing.T) {
		f := open(t)
		f.found("a.wav")
		f.Close()
		f.reopen()
		if _, ok := f.byPath()["a.wav"]; !ok {
			t.Error("the recording is gone")
		}
	})
	t.Run("a newer program's database is refused", func(t *testing.T) {
		f := open(t)
		if _, err := f.writer.Exec(`INSERT INTO goose_db_version (version_id, is_applied) VALUES (99999, 1)`); err != nil {
			t.Fatal(err)
		}
		f.Close()
		_, err := Open(f.ctx, Options{Path: f.path})
		if !errors.Is(err, ErrState) || !strings.Contains(err.Error(), "newer program") {
			t.Errorf("got %v", err)
		}
	})
}

func TestStrictTables(t *testing.T) {
	f := open(t)
	for _, bad := range []string{
		`INSERT INTO recordings (shelf_id, path, folded, size, modified_at, added_at) VALUES (1, 'x', 'x', 'big', 0, 0)`,
		`INSERT INTO recordings (shelf_id, path, folded, size, modified_at, added_at, state) VALUES (1, 'x', 'x', 1, 0, 0, 'lost')`,
		`INSERT INTO recordings (shelf_id, path, folded, size, modified_at, added_at) VALUES (77, 'x', 'x', 1, 0, 0)`,
		`INSERT INTO recordings (shelf_id, path, folded, size, modified_at, added_at) VALUES (1, '/x', 'x', 1, 0, 0)`,
		`INSERT INTO history (at, what, words) VALUES (0, 'exploded', '')`,
		`INSERT INTO shelves (name, root, copies, created_at) VALUES ('A b', '/r', '/c', 0)`,
	} {
		if _, err := f.writer.Exec(bad); err == nil {
			t.Errorf("accepted: %s", bad)
		}
	}
}
