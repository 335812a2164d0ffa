package store

import (
	"errors"
	"reflect"
	"slices"
	"strings"
	"testing"
	"time"

	"evenshelf/engine/level"
)

// sounding is a levelling whose readings have these hashes.
func sounding(before, after string) level.Outcome {
	o := done(-30, -18)
	o.Before.AudioHash, o.After.AudioHash = before, after
	return o
}

// A levelling is found by the sound it made, with the original it was made from, also where a later job has levelled
// that again; tags runs and failures made no sound.
func TestLevelledIsFoundByItsSound(t *testing.T) {
	f := open(t)
	rec := f.found("a.wav")["a.wav"]
	do := func(d Delivery, o level.Outcome) int64 {
		t.Helper()
		_, jobs := f.run(d)
		f.start(jobs[0])
		f.finish(jobs[0], o, "a.wav")
		return jobs[0]
	}
	keep := func(job int64, sum string) {
		t.Helper()
		if err := f.KeepOriginal(f.ctx, Original{RecordingID: rec.ID, JobID: job, SHA256: strings.Repeat(sum, 64),
			Levelled: strings.Repeat("f", 64), Stored: sum, Size: 5}); err != nil {
			t.Fatal(err)
		}
	}
	first := do(Replace, sounding("original", "one"))
	keep(first, "a")
	second := do(Replace, sounding("original", "two")) // from the same original, which is its now
	keep(second, "a")
	third := do(Replace, sounding("new take", "three"))
	keep(third, "b")
	do(Tags, sounding("tagged", "tagged"))
	copied := do(Copy, sounding("elsewhere", "copied"))
	failed := sounding("x", "failed")
	failed.Verdict.State = level.Failed
	do(Replace, failed)
	for sound, want := range map[string]struct {
		job      int64
		original string
	}{"one": {first, "a"}, "two": {second, "a"}, "three": {third, "b"}, "copied": {copied, ""}, "tagged": {}, "failed": {}, "original": {}, "": {}} {
		list, err := f.Levelled(f.ctx, f.shelf.ID, 0, sound)
		if err != nil || (want.job == 0) != (len(list) == 0) {
			t.Errorf("%q: %+v %v", sound, list, err)
			continue
		}
		if want.job == 0 {
			continue
		}
		if l := list[0]; l.JobID != want.job || l.RecordingID != rec.ID || l.Path != "a.wav" || (l.Original == nil) != (want.original == "") ||
			l.Original != nil && l.Original.Stored != want.original {
			t.Errorf("%q: %+v, want %+v", sound, l, want)
		}
	}
	if list, err := f.Levelled(f.ctx, f.addShelf("other").ID, 0, "one"); err != nil || len(list) != 0 {
		t.Errorf("on another shelf: %+v %v", list, err)
	}
}

// What is known to be moved is only what is certain, and following it keeps every row.
func TestFollow(t *testing.T) {
	moved := func(f *fixture) (from Recording, job int64) {
		t.Helper()
		f.found("a.wav", "b.wav")
		_, jobs := f.run(Copy)
		for i, sound := range []string{"sound of a", "sound of b"} {
			f.start(jobs[i])
			f.finish(jobs[i], sounding(sound, "copy"+sound), "")
		}
		list := files("b.wav", "new/a.wav")
		list[0].Size, list[1].Size = 1001, 77
		f.scan("", list)
		_, jobs = f.run(Measure)
		f.start(jobs[1])
		return f.byPath()["a.wav"], jobs[1]
	}
	f := open(t)
	from, job := moved(f)
	if id, err := f.MovedFrom(f.ctx, job, "sound of b"); id != 0 || err != nil {
		t.Errorf("b is there: %d %v", id, err)
	}
	id, err := f.MovedFrom(f.ctx, job, "sound of a")
	if err != nil || id != from.ID {
		t.Fatalf("%d %v, want %d", id, err, from.ID)
	}
	w, err := f.Follow(f.ctx, id, job)
	if err != nil || w.Recording.ID != from.ID || w.Recording.Path != "new/a.wav" || w.Recording.Missing || w.Recording.Size != 77 || w.Job.RecordingID != from.ID ||
		w.Recording.State != Working || w.Recording.JobID != job || w.Recording.Before == nil {
		t.Fatalf("%+v %v", w, err)
	}
	if _, err := f.Follow(f.ctx, id, job); !errors.Is(err, ErrState) {
		t.Errorf("followed twice: %v", err)
	}
	f.finish(job, sounding("sound of a", ""), "")
	all := f.byPath()
	if len(all) != 2 || all["new/a.wav"].ID != from.ID {
		t.Errorf("%+v", all)
	}
	jobs, err := f.RecordingJobs(f.ctx, from.ID)
	if err != nil || len(jobs) != 2 || jobs[0].Path != "new/a.wav" {
		t.Errorf("%+v %v", jobs, err)
	}
	history, err := f.RecordingHistory(f.ctx, from.ID)
	if err != nil || !slices.Contains(whats(history), "moved") || !slices.Contains(whats(history), "missing") {
		t.Errorf("%v %v", whats(history), err)
	}

	for why, change := range map[string]string{
		"it has a story of its own": `UPDATE jobs SET state = 'done' WHERE recording_id = (SELECT id FROM recordings WHERE path = 'new/a.wav')`,
		"it is missing too":         `UPDATE recordings SET missing = 1 WHERE path = 'new/a.wav'`,
		"the old one is there":      `UPDATE recordings SET missing = 0 WHERE path = 'a.wav'`,
		"another sounds alike": `UPDATE readings SET detail = json_set(detail, '$.audio_hash', 'sound of a') WHERE kind = 'before';
			UPDATE recordings SET missing = 1 WHERE path = 'b.wav'`,
		"it had no reading": `UPDATE recordings SET before_id = NULL WHERE path = 'a.wav'`,
	} {
		f := open(t)
		_, job := moved(f)
		f.exec(change)
		if id, err := f.MovedFrom(f.ctx, job, "sound of a"); id != 0 || err != nil {
			t.Errorf("%s: %d %v", why, id, err)
		}
	}
}

// A scan follows a file by its inode, or by its name where it is the only one; all else is a new file and a missing one.
func TestScanFollowsWhatWasMoved(t *testing.T) {
	file := func(path string, size int64, inode uint64) FoundFile {
		return FoundFile{Path: path, Size: size, ModifiedAt: someTime, Inode: inode}
	}
	later := file("x/a.wav", 10, 1)
	later.ModifiedAt = someTime.Add(time.Second)
	for _, c := range []struct {
		why        string
		was, is    []FoundFile
		unread     []string
		want       ScanResult
		from, into string
	}{
		{"renamed", []FoundFile{file("a.wav", 10, 1)}, []FoundFile{file("b.wav", 10, 1)}, nil, ScanResult{Found: 1, Moved: 1}, "a.wav", "b.wav"},
		{"moved to another disk", []FoundFile{file("a.wav", 10, 1)}, []FoundFile{file("x/a.wav", 10, 9)}, nil, ScanResult{Found: 1, Moved: 1}, "a.wav", "x/a.wav"},
		{"no inode was known", []FoundFile{file("a.wav", 10, 0)}, []FoundFile{file("x/a.wav", 10, 9)}, nil, ScanResult{Found: 1, Moved: 1}, "a.wav", "x/a.wav"},
		{"renamed among files alike", []FoundFile{file("a.wav", 10, 1), file("b.wav", 10, 2)}, []FoundFile{file("c.wav", 10, 2), file("d.wav", 10, 1)}, nil,
			ScanResult{Found: 2, Moved: 2}, "a.wav", "d.wav"},
		{"another name and inode", []FoundFile{file("a.wav", 10, 1)}, []FoundFile{file("b.wav", 10, 9)}, nil, ScanResult{Found: 1, Added: 1, Missing: 1}, "", ""},
		{"another length", []FoundFile{file("a.wav", 10, 1)}, []FoundFile{file("x/a.wav", 11, 1)}, nil, ScanResult{Found: 1, Added: 1, Missing: 1}, "", ""},
		{"another time", []FoundFile{file("a.wav", 10, 1)}, []FoundFile{later}, nil, ScanResult{Found: 1, Added: 1, Missing: 1}, "", ""},
		{"another extension", []FoundFile{file("a.wav", 10, 1)}, []FoundFile{file("a.mp3", 10, 1)}, nil, ScanResult{Found: 1, Added: 1, Missing: 1}, "", ""},
		{"either of two", []FoundFile{file("1/a.wav", 10, 0), file("2/a.wav", 10, 0)}, []FoundFile{file("3/a.wav", 10, 0)}, nil, ScanResult{Found: 1, Added: 1, Missing: 2}, "", ""},
		{"to either of two", []FoundFile{file("1/a.wav", 10, 0)}, []FoundFile{file("2/a.wav", 10, 0), file("3/a.wav", 10, 0)}, nil, ScanResult{Found: 2, Added: 2, Missing: 1}, "", ""},
		{"a copy", []FoundFile{file("a.wav", 10, 1)}, []FoundFile{file("a.wav", 10, 1), file("x/a.wav", 10, 2)}, nil, ScanResult{Found: 2, Added: 1}, "", ""},
		{"the folder could not be read", []FoundFile{file("1/a.wav", 10, 1)}, []FoundFile{file("2/a.wav", 10, 2)}, []string{"1"},
			ScanResult{Found: 1, Added: 1, Unread: []string{"1"}}, "", ""},
	} {
		t.Run(c.why, func(t *testing.T) {
			f := open(t)
			f.scan("", c.was)
			was := f.byPath()
			if got := f.scan("", c.is, c.unread...); !reflect.DeepEqual(got, c.want) {
				t.Errorf("%+v, want %+v", got, c.want)
			}
			now := f.byPath()
			if c.from != "" {
				if now[c.into].ID != was[c.from].ID || now[c.into].Missing || len(now) != len(was) {
					t.Errorf("%+v", now)
				}
				history, err := f.RecordingHistory(f.ctx, now[c.into].ID)
				if last := history[len(history)-1]; err != nil || last.What != "moved" || !strings.Contains(last.Words, c.from) {
					t.Errorf("%+v %v", history, err)
				}
			}
			if c.want.Unread == nil {
				if again := f.scan("", c.is); again.Added+again.Changed+again.Moved+again.Missing != 0 {
					t.Errorf("scanned again: %+v", again)
				}
			}
		})
	}
	// One that was missing for long is found again elsewhere.
	f := open(t)
	f.scan("", []FoundFile{file("a.wav", 10, 1)})
	f.scan("", nil)
	if got := f.scan("", []FoundFile{file("b.wav", 10, 1)}); got.Moved != 1 || f.byPath()["b.wav"].Missing {
		t.Errorf("%+v", got)
	}
}

func TestAlbums(t *testing.T) {
	f := open(t)
	m := f.found("a.wav", "b.wav", "c.wav")
	if unread, err := f.AlbumsUnread(f.ctx, f.shelf.ID); err != nil || len(unread) != 3 {
		t.Fatalf("%+v %v", unread, err)
	}
	if AlbumKey("Été ", "The House") != AlbumKey("ÉTÉ", "the house ") || AlbumKey("a", "b") == AlbumKey("a b", "") || AlbumKey(" ", "x") != "" {
		t.Error("albums are not told apart as they should be")
	}
	key := AlbumKey("One", "x")
	if err := f.KeepAlbums(f.ctx, map[int64]string{m["a.wav"].ID: key, m["b.wav"].ID: key, m["c.wav"].ID: ""}); err != nil {
		t.Fatal(err)
	}
	run, _ := f.run(Tags)
	list, err := f.AlbumMembers(f.ctx, run.ID, key)
	if err != nil || len(list) != 2 || list[0].Path != "a.wav" {
		t.Errorf("%+v %v", list, err)
	}
	if none, err := f.AlbumMembers(f.ctx, run.ID, ""); err != nil || len(none) != 0 {
		t.Errorf("of no album: %+v %v", none, err)
	}
	changed := files("a.wav", "b.wav", "c.wav")
	changed[0].Size++
	f.scan("", changed)
	if unread, err := f.AlbumsUnread(f.ctx, f.shelf.ID); err != nil || len(unread) != 1 || unread[0].Path != "a.wav" {
		t.Errorf("after a change: %+v %v", unread, err)
	}
	if got, err := f.Album(f.ctx, m["a.wav"].ID); err != nil || got != "" {
		t.Errorf("%q %v", got, err)
	}
}
