package store

import (
	"errors"
	"reflect"
	"testing"
	"time"
)

func (f *fixture) scan(folder string, list []FoundFile, unread ...string) ScanResult {
	f.t.Helper()
	res, err := f.FoundPartly(f.ctx, f.shelf.ID, folder, list, unread)
	if err != nil {
		f.t.Fatal(err)
	}
	return res
}

func TestFound(t *testing.T) {
	f := open(t)
	all := files("a.wav", "a/x.wav", "ab/x.wav", "b.wav")
	check := func(what string, got, want ScanResult) {
		t.Helper()
		if !reflect.DeepEqual(got, want) {
			t.Errorf("%s: %+v, want %+v", what, got, want)
		}
	}
	check("first scan", f.scan("", all), ScanResult{Found: 4, Added: 4})
	check("same again", f.scan("", all), ScanResult{Found: 4})
	check("only folder a, now empty", f.scan("a", nil), ScanResult{Missing: 1})
	m := f.byPath()
	if !m["a/x.wav"].Missing || m["ab/x.wav"].Missing || m["a.wav"].Missing {
		t.Errorf("a scan of folder a marked others: %+v", m)
	}
	check("still missing", f.scan("a", nil), ScanResult{})
	check("there again", f.scan("", all), ScanResult{Found: 4})
	if f.byPath()["a/x.wav"].Missing {
		t.Error("a/x.wav is still missing")
	}
	check("a folder could not be read", f.scan("", files("b.wav"), "a", "ab"), ScanResult{Found: 1, Changed: 1, Missing: 1, Unread: []string{"a", "ab"}})
	if m := f.byPath(); !m["a.wav"].Missing || m["a/x.wav"].Missing || m["ab/x.wav"].Missing {
		t.Errorf("unread folders: %+v", m)
	}
	history, err := f.RecordingHistory(f.ctx, m["a/x.wav"].ID)
	if err != nil || !reflect.DeepEqual(whats(history), []string{"found", "missing", "found"}) {
		t.Errorf("history %v %v", whats(history), err)
	}
	check("twice the same path", f.scan("", append(all, all...)), ScanResult{Found: 4, Changed: 1})
}

func TestFoundRefusesStrangePaths(t *testing.T) {
	f := open(t)
	for _, c := range []struct{ folder, path string }{
		{"", ""}, {"", "/etc/x.wav"}, {"", "../x.wav"}, {"", "a/../../x.wav"}, {"", "a//x.wav"}, {"", "./x.wav"},
		{"", ".."}, {"", "a/"}, {"", "x\x00.wav"}, {"a", "ab/x.wav"}, {"a", "b.wav"}, {"/a", "/a/x.wav"}, {"..", "../x.wav"},
	} {
		_, err := f.Found(f.ctx, f.shelf.ID, c.folder, []FoundFile{{Path: c.path, ModifiedAt: someTime}})
		if !errors.Is(err, ErrInvalid) {
			t.Errorf("folder %q, path %q: %v", c.folder, c.path, err)
		}
	}
	names := []string{"..a/x.wav", "latin-\xe9.wav", "a b/%_'\".wav", "\u202eright-to-left.wav", "-rf.wav"}
	f.scan("", files(names...))
	m := f.byPath()
	for _, name := range names {
		if _, ok := m[name]; !ok {
			t.Errorf("%q did not come back", name)
		}
	}
}

func TestChangedOnDisk(t *testing.T) {
	f := open(t)
	f.found("a.wav", "b.wav")
	_, jobs := f.run(Copy)
	f.start(jobs[0])
	f.finish(jobs[0], done(-30, -18), "a.wav")
	list := files("a.wav", "b.wav")
	list[0].ModifiedAt = list[0].ModifiedAt.Add(time.Millisecond)
	list[1].Size++
	if res := f.scan("", list); res.Changed != 2 {
		t.Fatalf("%+v", res)
	}
	a, b := f.byPath()["a.wav"], f.byPath()["b.wav"]
	if a.Before != nil || a.After != nil || a.State != "" || a.Duration != nil || a.Format != "" || a.Faults != 0 {
		t.Errorf("the old file's figures are still shown: %+v", a)
	}
	if b.State != Waiting {
		t.Errorf("b waits for its turn and will be read as it is then, but is %q", b.State)
	}
	before, after, err := f.Readings(f.ctx, a.ID)
	if before != nil || after != nil || err != nil {
		t.Errorf("readings of the old file: %v %v %v", before, after, err)
	}
	history, err := f.RecordingHistory(f.ctx, a.ID)
	if err != nil || history[len(history)-1].What != "changed" {
		t.Errorf("history: %v %v", whats(history), err)
	}
	page, err := f.Recordings(f.ctx, RecordingQuery{State: Never})
	if err != nil || page.Total != 1 || page.Recordings[0].ID != a.ID {
		t.Errorf("never: %+v %v", page, err)
	}
}
