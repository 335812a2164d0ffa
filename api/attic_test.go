package api

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"slices"
	"strings"
	"syscall"
	"testing"

	"evenshelf/engine/level"
	"evenshelf/store"
)

// The sound before is the one that was measured before, wherever the file has gone; likewise after.
func TestReplacedRecordingPlaysItsOriginal(t *testing.T) {
	h := open(t, nil)
	_, jobs := h.startRun(store.Replace)
	for i, j := range jobs { // the first is replaced, the second held
		h.finish(j, []level.State{level.Done, level.Held}[i])
	}
	want := func(j store.Job, before, after string) {
		t.Helper()
		for address, want := range map[string]string{
			at("/recordings/%d/sound", j.RecordingID):               before,
			at("/recordings/%d/sound?version=after", j.RecordingID): after,
			at("/recordings/%d/result", j.RecordingID):              after,
		} {
			r := h.get(address)
			if want == "" {
				r.wantProblem(t, kindNotFound, "no levelled file now")
			} else if r.status != 200 || string(r.body) != want {
				t.Errorf("%s: %d %q, want %q", address, r.status, r.body, want)
			}
		}
	}
	replaced, held := jobs[0], jobs[1]
	want(replaced, arrived[replaced.Path], "levelled "+replaced.Path)
	want(held, arrived[held.Path], "levelled "+held.Path)
	if there, err := os.ReadFile(h.shelf.Root + "/" + held.Path); err != nil || string(there) != arrived[held.Path] {
		t.Errorf("the held recording's place holds %q, %v", there, err)
	}

	// Replaced once more, it is levelled from its original; what is held then leaves the first result in its place.
	_, jobs = h.startRun(store.Replace)
	h.finish(jobs[0], level.Held)
	want(replaced, arrived[replaced.Path], "levelled "+replaced.Path)
	if there, err := os.ReadFile(h.shelf.Root + "/" + replaced.Path); err != nil || string(there) != "levelled "+replaced.Path {
		t.Errorf("the replaced recording's place holds %q, %v", there, err)
	}

	// A copy made later is levelled from the original too, and so is the reading before it.
	_, jobs = h.start()
	h.finish(jobs[0], level.Done)
	want(replaced, arrived[replaced.Path], "levelled "+replaced.Path)

	// Measuring alone reads the levelled file.
	_, jobs = h.startRun(store.Measure)
	if _, err := h.db.StartJob(t.Context(), jobs[0].ID); err != nil {
		t.Fatal(err)
	}
	measured := level.Outcome{Before: analysis(-18.04, -3), Verdict: level.Verdict{State: level.Done}}
	if err := h.db.FinishJob(t.Context(), jobs[0].ID, measured, "", nil); err != nil {
		t.Fatal(err)
	}
	want(replaced, "levelled "+replaced.Path, "levelled "+replaced.Path)
}

// A job that found its work done serves what the job before it delivered, and says whose it is.
func TestResultThatStillStands(t *testing.T) {
	h := open(t, nil)
	_, first := h.startRun(store.Replace)
	h.finish(first[0], level.Done)
	run, jobs := h.startRun(store.Replace)
	if _, err := h.db.StartJob(t.Context(), jobs[0].ID); err != nil {
		t.Fatal(err)
	}
	if err := h.db.FinishSame(t.Context(), jobs[0].ID, first[0].ID, "levelled already", nil); err != nil {
		t.Fatal(err)
	}
	for version, want := range map[string]string{"before": arrived[jobs[0].Path], "after": "levelled " + jobs[0].Path} {
		if r := h.get(at("/recordings/%d/sound?version=%s", jobs[0].RecordingID, version)); r.status != 200 || string(r.body) != want {
			t.Errorf("%s: %d %q, want %q", version, r.status, r.body, want)
		}
	}
	var got struct{ Jobs []store.Job }
	h.get(at("/runs/%d/jobs", run.ID)).into(t, 200, &got)
	if j := got.Jobs[0]; j.SameAs != first[0].ID || j.Reason != "levelled already" || j.Plan == nil || j.After == nil || j.Renders != 0 {
		t.Errorf("%+v", j)
	}
	if r := h.get(at("/recordings/%d/timeline", jobs[0].RecordingID)); !strings.Contains(string(r.body), `"steady_db":13.2`) {
		t.Errorf("timeline without its ride: %s", r.body)
	}
}

func TestRestoredRecordingIsAsItWas(t *testing.T) {
	h := open(t, nil)
	run, jobs := h.startRun(store.Replace)
	h.finish(jobs[0], level.Done)
	h.finish(jobs[1], level.Done)
	path := at("/recordings/%d", jobs[0].RecordingID)
	var d recordingDetail
	h.get(path).into(t, 200, &d)
	if o := d.Original; o == nil || o.Path != jobs[0].Path || o.RunID != run.ID || o.SHA256 != hash(arrived[o.Path]) {
		t.Errorf("original %+v", o)
	}

	var back store.Recording
	h.ask("POST", path+"/restore", "").into(t, 200, &back)
	if back.State != "" || back.After != nil || back.Before == nil || back.Size != 10 {
		t.Errorf("restored: %+v", back)
	}
	r := h.get(path)
	d = recordingDetail{}
	r.into(t, 200, &d)
	if last := d.History[len(d.History)-1]; d.Original != nil || last.What != "restored" || !strings.Contains(string(r.body), `"original":null`) {
		t.Errorf("after the restore: %s", r.body)
	}
	if r := h.get(path + "/sound"); string(r.body) != arrived[jobs[0].Path] {
		t.Errorf("the sound before is %q", r.body)
	}
	h.get(path+"/sound?version=after").wantProblem(t, kindNotFound, "no levelled file now")
	h.ask("POST", path+"/restore", "").wantProblem(t, kindNotFound, "original of recording")
	h.ask("POST", at("/recordings/99/restore"), "").wantProblem(t, kindNotFound, "")
	h.ask("POST", at("/recordings/x/restore"), "").wantProblem(t, kindBadRequest, "id")

	h.write(h.shelf.Root, jobs[1].Path, "somebody's work")
	h.ask("POST", at("/recordings/%d/restore", jobs[1].RecordingID), "").wantProblem(t, kindState, "changed since it was levelled")
	h.ask("POST", path+"/restore", "", "Sec-Fetch-Site", "cross-site").wantProblem(t, kindCrossOrigin, "")
}

func TestAtticPageByPage(t *testing.T) {
	h := open(t, nil)
	if r := h.get(at("/attic")); strings.TrimSpace(string(r.body)) != `{"originals":[]}` {
		t.Errorf("an empty attic: %d %s", r.status, r.body)
	}
	run, jobs := h.startRun(store.Replace)
	h.finish(jobs[0], level.Done)
	h.finish(jobs[1], level.Done)
	measured, _ := h.startRun(store.Measure)
	first, second := min(jobs[0].RecordingID, jobs[1].RecordingID), max(jobs[0].RecordingID, jobs[1].RecordingID)
	for _, c := range []struct {
		address string
		want    []int64
	}{
		{at("/attic"), []int64{first, second}},
		{at("/attic?limit=1"), []int64{first}},
		{at("/attic?limit=1&after=%d", first), []int64{second}},
		{at("/attic?after=%d", second), nil},
		{at("/attic?shelf=%d&run=%d", h.shelf.ID, run.ID), []int64{first, second}},
		{at("/attic?shelf=%d", h.inbox.ID), nil},
		{at("/attic?run=%d", measured.ID), nil},
	} {
		var got struct{ Originals []store.Original }
		r := h.get(c.address)
		r.into(t, 200, &got)
		if len(got.Originals) != len(c.want) {
			t.Errorf("%s: %s", c.address, r.body)
			continue
		}
		for i, o := range got.Originals {
			if o.RecordingID != c.want[i] {
				t.Errorf("%s: %s", c.address, r.body)
			}
		}
		for _, secret := range []string{"stored", "levelled", h.shelf.Attic()} { // where it lies is no business of clients
			if strings.Contains(strings.ToLower(string(r.body)), secret) {
				t.Errorf("%s tells %q: %s", c.address, secret, r.body)
			}
		}
	}
	h.get(at("/attic?run=%d", measured.ID+1)).wantProblem(t, kindNotFound, fmt.Sprintf("run %d", measured.ID+1))
	h.get(at("/attic/versions?run=%d", measured.ID+1)).wantProblem(t, kindNotFound, "")
	h.get(at("/attic?run=0&limit=1001")).wantProblem(t, kindBadRequest, "limit")
	down := open(t, breakStore)
	down.get(at("/attic")).wantProblem(t, kindInternal, "")
	down.get(at("/recordings/%d", jobs[0].RecordingID)).wantProblem(t, kindInternal, "")
}

// A file that somebody made is listed with where it is, and an original with the run it is kept for.
func TestAtticSaysWhereTheRestIs(t *testing.T) {
	h := open(t, nil)
	if r := h.get(at("/attic/versions")); strings.TrimSpace(string(r.body)) != `{"versions":[]}` {
		t.Errorf("an empty attic: %d %s", r.status, r.body)
	}
	one, jobs := h.startRun(store.Replace)
	h.finish(jobs[0], level.Done)
	h.finish(jobs[1], level.Done)
	two, again := h.startRun(store.Replace)
	h.finish(jobOf(again, jobs[0].RecordingID), level.Done)
	id := jobs[0].RecordingID
	o, err := h.db.Original(t.Context(), id)
	if err != nil {
		t.Fatal(err)
	}
	mine := o
	mine.SHA256, mine.Stored, mine.Length = hash("mine"), "mine.wav", 4
	if err := h.db.KeepOriginal(t.Context(), o, mine, o); err != nil {
		t.Fatal(err)
	}
	var page struct{ Versions []store.Version }
	for address, want := range map[string]int{"/attic/versions": 2, fmt.Sprintf("/attic/versions?shelf=%d&run=%d", h.shelf.ID, two.ID): 1,
		fmt.Sprintf("/attic/versions?run=%d", one.ID): 1, fmt.Sprintf("/attic/versions?shelf=%d", h.inbox.ID): 0, fmt.Sprintf("/attic/versions?after=%d", id): 0} {
		r := h.get(at("%s", address))
		r.into(t, 200, &page)
		if len(page.Versions) != want {
			t.Errorf("%s: %s", address, r.body)
		}
	}
	h.get(at("/attic/versions?run=%d", two.ID)).into(t, 200, &page)
	if v := page.Versions[0]; v.RecordingID != id || v.File != filepath.Join(h.shelf.Attic(), "mine.wav") || v.Earlier || v.SHA256 != hash("mine") {
		t.Errorf("%+v", v)
	}
	var detail struct {
		Versions []store.Version
		History  []store.Event
	}
	h.get(at("/recordings/%d", id)).into(t, 200, &detail)
	if len(detail.Versions) != 2 || !slices.ContainsFunc(detail.History, func(e store.Event) bool { return strings.Contains(e.Words, `to the attic as "mine.wav"`) }) {
		t.Errorf("%+v", detail)
	}
	var kept struct {
		Originals []store.Original
		KeptBy    []store.KeptBy `json:"kept_by"`
	}
	h.get(at("/attic?run=%d", one.ID)).into(t, 200, &kept)
	if len(kept.Originals) != 1 || len(kept.KeptBy) != 1 || kept.KeptBy[0] != (store.KeptBy{RunID: two.ID, Originals: 1}) {
		t.Errorf("%+v", kept)
	}
	if all, err := h.db.AtticOf(t.Context(), h.shelf.ID); err != nil || all.Originals != 2 || all.Versions != 2 || all.Bytes == 0 {
		t.Errorf("%+v %v", all, err)
	}
}

func jobOf(list []store.Job, recordingID int64) store.Job {
	return list[slices.IndexFunc(list, func(j store.Job) bool { return j.RecordingID == recordingID })]
}

func TestReplaceWantsAFolderItCanWriteTo(t *testing.T) {
	h := open(t, nil)
	body := `{"shelf_id":1,"profile":"rotation","delivery":"replace"}`
	var run store.Run
	h.ask("POST", at("/runs"), body).into(t, 201, &run)
	if run.Delivery != store.Replace {
		t.Errorf("delivery %q", run.Delivery)
	}
	if err := os.RemoveAll(h.shelf.Root); err != nil {
		t.Fatal(err)
	}
	h.ask("POST", at("/runs"), body).wantProblem(t, kindInvalid,
		`delivery: replace has to write to the folder of shelf "music", and that is not possible here (no such file or directory)`)
	h.ask("POST", at("/runs"), strings.Replace(body, "replace", "copy", 1)).into(t, 201, &run)

	dir, err := os.MkdirTemp("", "evenshelf") // not t.TempDir, whose parent lets nobody else in
	if err != nil {
		t.Fatal(err)
	}
	defer os.Remove(dir)
	for mode, want := range map[os.FileMode]error{0o777: nil, 0o555: syscall.EACCES} {
		if err := os.Chmod(dir, mode); err != nil {
			t.Fatal(err)
		}
		if err := asNobody(func() error { return writable(dir) }); !errors.Is(err, want) {
			t.Errorf("mode %o: %v, want %v", mode, err, want)
		}
	}
}

// unfit is a queue to which no format fits.
type unfit struct{ Queue }

func (unfit) StartRun(context.Context, store.NewRun) (store.Run, error) {
	return store.Run{}, fmt.Errorf("none of the 3 files could be replaced: %w", store.ErrFormat)
}

func TestReplaceInAFormatThatDoesNotFit(t *testing.T) {
	h := open(t, func(o *Options) { o.Queue = unfit{o.Queue} })
	h.ask("POST", at("/runs"), `{"shelf_id":1,"profile":"rotation","delivery":"replace","format":"mp3"}`).wantProblem(t, kindInvalid, "format: none of the 3 files could be replaced")
}

// asNobody runs fn on a thread that has given up the superuser's right to write everywhere, if the tests run as
// superuser (in a container they do). The thread is not used again.
func asNobody(fn func() error) error {
	if syscall.Geteuid() != 0 {
		return fn()
	}
	result := make(chan error)
	go func() {
		runtime.LockOSThread() // never unlocked: the thread ends with the goroutine
		const nobody = 65534
		if _, _, errno := syscall.RawSyscall(syscall.SYS_SETFSUID, nobody, 0, 0); errno != 0 {
			result <- errno
			return
		}
		result <- fn()
	}()
	return <-result
}
