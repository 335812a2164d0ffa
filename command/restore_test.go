//go:build !race

package command

import (
	"context"
	"encoding/json"
	"fmt"
	"log/slog"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"evenshelf/store"
)

// Once the server answers at all, the shelves it was told of are there.
func TestShelvesAreThereWhenTheServerAnswers(t *testing.T) {
	root := t.TempDir()
	ctx, stop := context.WithCancel(t.Context())
	defer stop()
	a := &app{cli: &cli{Workers: 1}, ctx: ctx, stdout: t.Output(), stderr: t.Output(), log: slog.New(slog.NewTextHandler(t.Output(), nil))}
	s, err := a.startServer(serverOptions{data: t.TempDir(), listen: "127.0.0.1:0", shelves: map[string]string{"music": root}})
	if err != nil {
		t.Fatal(err)
	}
	defer s.stop()
	resp, err := http.Get(s.url + "api/v1/shelves")
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	var got struct{ Shelves []store.Shelf }
	if err := json.NewDecoder(resp.Body).Decode(&got); err != nil || len(got.Shelves) != 2 {
		t.Errorf("%+v %v", got, err)
	}
	// One that cannot be registered ends the start before anything answers.
	if _, err := a.startServer(serverOptions{data: t.TempDir(), listen: "127.0.0.1:0", shelves: map[string]string{"music": filepath.Join(root, "nothing")}}); err == nil {
		t.Error("a shelf without a folder was registered")
	}
}

// What another run wrote again is that run's to bring back, which is said; what there is not ends with 1; and a file that
// somebody tagged is listed with where it is. metaflac writes the title.
func TestRestoreSaysWhereThingsAre(t *testing.T) {
	root := t.TempDir()
	song := excerpt(t, filepath.Join(root, "song.flac"))
	original, err := os.ReadFile(song)
	if err != nil {
		t.Fatal(err)
	}
	c := startChild(t, "--data", t.TempDir(), "--shelf", "music="+root)
	var shelves struct{ Shelves []store.Shelf }
	c.call(t, "GET", "/shelves", "", &shelves)
	id := shelves.Shelves[0].ID
	if shelves.Shelves[0].Name != "music" {
		id = shelves.Shelves[1].ID
	}
	c.call(t, "POST", fmt.Sprintf("/shelves/%d/scan", id), "{}", &struct{}{})
	level := func(profile, delivery string) {
		t.Helper()
		var run store.Run
		c.call(t, "POST", "/runs", fmt.Sprintf(`{"shelf_id":%d,"profile":%q,"delivery":%q}`, id, profile, delivery), &run)
		c.follow(t, run.ID, func(r store.Run) bool { return r.State == store.RunFinished })
		if c.call(t, "GET", fmt.Sprintf("/runs/%d", run.ID), "", &run); run.Done != 1 {
			t.Fatalf("%+v", run)
		}
	}
	restore := func(args ...string) (int, string) {
		code, out, stderr := run(t, append([]string{"restore", "--server", c.url}, args...)...)
		return code, out + stderr
	}
	if code, said := restore("--all"); code != exitSome || !strings.Contains(said, "nothing in the attic") {
		t.Errorf("%d %s", code, said)
	}
	level("rotation", "replace")
	if out, err := exec.Command("metaflac", "--set-tag=TITLE=Mine", song).CombinedOutput(); err != nil {
		t.Fatalf("%v %s", err, out)
	}
	level("untouched", "tags")
	level("transmitter", "replace")
	for run, want := range map[string]string{"1": "run 3 wrote 1 of its files since: restore --of-run 3 brings those back", "2": "run 3 wrote 1 of its files since", "9": "run 9"} {
		if code, said := restore("--of-run", run); code != exitSome || !strings.Contains(said, want) {
			t.Errorf("run %s: %d %s", run, code, said)
		}
	}
	code, said := restore("--list")
	if code != exitFine || strings.Count(said, "with other tags: /") == 0 || strings.Contains(said, "earlier original") {
		t.Errorf("%d %s", code, said)
	}
	if code, said := restore("--of-run", "3"); code != exitFine || !strings.Contains(said, "restored  song.flac") {
		t.Errorf("%d %s", code, said)
	}
	if now, err := os.ReadFile(song); err != nil || string(now) != string(original) {
		t.Errorf("not the original bit for bit: %v", err)
	}
	if code, said := restore("--list"); code != exitFine || !strings.Contains(said, "with other tags: /") {
		t.Errorf("%d %s", code, said)
	}
}
