package store

import (
	"errors"
	"math"
	"slices"
	"testing"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
)

// A folder is its recordings, not those below it nor those of a folder whose name begins alike; a run that takes
// only some of them still is about the whole folder.
func TestMembers(t *testing.T) {
	f := open(t)
	paths := []string{"a/1.wav", "a/2.wav", "a/b/3.wav", "a b/4.wav", "ab/5.wav", "été 🎻/6.wav", "été 🎻/x/7.wav", "a/gone.wav", "top.wav"}
	m := f.found(paths...)
	f.found(slices.DeleteFunc(slices.Clone(paths), func(p string) bool { return p == "a/gone.wav" })...)
	run, _ := f.run(Copy)
	for folder, want := range map[string][]string{"a": {"a/1.wav", "a/2.wav"}, "a/b": {"a/b/3.wav"}, "été 🎻": {"été 🎻/6.wav"}, "": {"top.wav"}, "none": nil} {
		list, err := f.Members(f.ctx, run.ID, folder)
		var got []string
		for _, r := range list {
			got = append(got, r.Path)
		}
		if err != nil || !slices.Equal(got, want) {
			t.Errorf("%q: %q, want %q (%v)", folder, got, want, err)
		}
	}
	one, err := f.CreateRun(f.ctx, NewRun{ShelfID: f.shelf.ID, Recordings: []int64{m["a/2.wav"].ID}, Profile: someProfile(t), Delivery: Copy}, enqueueNothing)
	if err != nil {
		t.Fatal(err)
	}
	if list, err := f.Members(f.ctx, one.ID, "a"); err != nil || len(list) != 2 || list[0].Path != "a/1.wav" {
		t.Errorf("a run of one recording: %+v %v", list, err)
	}
	if _, err := f.Members(f.ctx, 99, "a"); !errors.Is(err, ErrNotFound) {
		t.Errorf("of no run: %v", err)
	}
}

// The first reading that was kept holds, for that folder in that run only.
func TestSharedReading(t *testing.T) {
	f := open(t)
	f.found("a/1.wav")
	run, _ := f.run(Copy)
	if _, err := f.Shared(f.ctx, run.ID, "a"); !errors.Is(err, ErrNotFound) {
		t.Errorf("before it was measured: %v", err)
	}
	first := level.Shared{Integrated: -23.123456789012345, TruePeak: -1.00000001}
	for _, measured := range []level.Shared{first, {Integrated: -9, TruePeak: 1}} {
		if got, err := f.KeepShared(f.ctx, run.ID, "a", measured); err != nil || got != first {
			t.Errorf("kept %+v, got %+v: %v", measured, got, err)
		}
	}
	if got, err := f.Shared(f.ctx, run.ID, "a"); err != nil || got != first {
		t.Errorf("%+v %v", got, err)
	}
	silent := level.Shared{Integrated: audio.LUFS(math.Inf(-1)), TruePeak: audio.DBTP(audio.Undefined)}
	if got, err := f.KeepShared(f.ctx, run.ID, "", silent); err != nil || audio.Defined(got.Integrated) || audio.Defined(got.TruePeak) {
		t.Errorf("%+v %v", got, err)
	}
	if _, err := f.KeepShared(f.ctx, 99, "a", first); err == nil {
		t.Error("kept for no run")
	}
}
