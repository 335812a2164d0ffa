//go:build !race

package command

import (
	"bufio"
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"io"
	"io/fs"
	"math"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"evenshelf/engine/level"
	"evenshelf/engine/media"
	"evenshelf/store"
)

// TestMain lets this test program play the part of the real one, so that a test can kill it.
func TestMain(m *testing.M) {
	if os.Getenv("EVENSHELF_TEST_CHILD") != "" {
		os.Exit(Run(context.Background(), os.Args[1:], os.Stdout, os.Stderr))
	}
	os.Exit(m.Run())
}

// child is a server in a process of its own.
type child struct {
	cmd *exec.Cmd
	url string
	log *bytes.Buffer
}

func startChild(t *testing.T, args ...string) *child {
	t.Helper()
	c := &child{cmd: exec.Command(os.Args[0], append([]string{"serve", "--listen", "127.0.0.1:0"}, args...)...), log: &bytes.Buffer{}}
	c.cmd.Env = append(os.Environ(), "EVENSHELF_TEST_CHILD=1")
	c.cmd.Stderr = c.log
	c.cmd.SysProcAttr = &syscall.SysProcAttr{Pdeathsig: syscall.SIGKILL}
	out, err := c.cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := c.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { c.kill() })
	line, err := bufio.NewReader(out).ReadString('\n')
	fields := strings.Fields(line)
	if err != nil || len(fields) < 4 {
		t.Fatalf("the server did not say where it is: %q, %v\n%s", line, err, c.log)
	}
	c.url = strings.TrimSuffix(fields[3], "/")
	return c
}

// kill is kill -9: nothing gets a chance to tidy up.
func (c *child) kill() {
	if c.cmd.ProcessState == nil {
		c.cmd.Process.Kill()
		c.cmd.Wait()
	}
}

func (c *child) call(t *testing.T, method, path, body string, v any) {
	t.Helper()
	req, err := http.NewRequest(method, c.url+"/api/v1"+path, strings.NewReader(body))
	if err != nil {
		t.Fatal(err)
	}
	req.Header.Set("Content-Type", "application/json")
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		t.Fatalf("%v\n%s", err, c.log)
	}
	defer resp.Body.Close()
	b, _ := io.ReadAll(resp.Body)
	if resp.StatusCode >= 300 {
		t.Fatalf("%s %s: %s: %s", method, path, resp.Status, b)
	}
	if err := json.Unmarshal(b, v); err != nil {
		t.Fatalf("%s %s: %v: %s", method, path, err, b)
	}
}

// follow reads a run's event stream until enough says so or the stream ends.
func (c *child) follow(t *testing.T, runID int64, enough func(store.Run) bool) {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 3*time.Minute)
	defer cancel()
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, fmt.Sprintf("%s/api/v1/runs/%d/events", c.url, runID), nil)
	if err != nil {
		t.Fatal(err)
	}
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		t.Fatalf("%v\n%s", err, c.log)
	}
	defer resp.Body.Close()
	event := ""
	lines := bufio.NewScanner(resp.Body)
	for lines.Scan() {
		name, value, _ := strings.Cut(lines.Text(), ":")
		value = strings.TrimSpace(value)
		switch name {
		case "event":
			event = value
		case "data":
			var run store.Run
			if event == "run" && json.Unmarshal([]byte(value), &run) == nil && enough(run) {
				return
			}
		}
		if event == "end" {
			return
		}
	}
	t.Fatalf("the event stream broke off: %v\n%s", lines.Err(), c.log)
}

// visible lists the files a person would see below dir, and hidden those that begin with a dot.
func visible(t *testing.T, dir string) (seen, hidden []string) {
	t.Helper()
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		switch {
		case err != nil || d.IsDir():
			return err
		case strings.HasPrefix(d.Name(), "."):
			hidden = append(hidden, path)
		default:
			seen = append(seen, path)
		}
		return nil
	})
	if err != nil && !os.IsNotExist(err) {
		t.Fatal(err)
	}
	return seen, hidden
}

// inTolerance reads a delivered file as a new pair of ears would.
func inTolerance(t *testing.T, path string) {
	t.Helper()
	a, err := (&level.Engine{Media: media.Find()}).Analyse(context.Background(), path, level.Options{})
	if err != nil {
		t.Errorf("a delivered file cannot be read: %v", err)
		return
	}
	if len(a.Faults) > 0 && a.Faults[0].Code == "truncated" {
		t.Errorf("%s is not whole", path)
	}
	if math.Abs(float64(a.Integrated+18)) > 0.3 || a.TruePeak > -0.95 {
		t.Errorf("%s: %.2f LUFS, %.2f dBTP", path, a.Integrated, a.TruePeak)
	}
}

// A run over real music in every format the shelf holds, with the server killed in the middle: after a
// restart the run ends, every copy is whole and in tolerance, and no original has changed.
func TestKilledServerFinishesItsRun(t *testing.T) {
	shelf, data := t.TempDir(), t.TempDir()
	for i := range 24 {
		ext := []string{"wav", "mp3", "flac", "ogg"}[i%4]
		excerpt(t, filepath.Join(shelf, fmt.Sprintf("block %d", i%3), fmt.Sprintf("song %02d.%s", i, ext)))
	}
	originals, _ := visible(t, shelf)
	before := map[string][32]byte{}
	for _, path := range originals {
		before[path] = hash(t, path)
	}
	args := []string{"--data", data, "--shelf", "music=" + shelf, "--workers", "2"}
	server := startChild(t, args...)
	var shelves struct{ Shelves []store.ShelfSummary }
	server.call(t, "GET", "/shelves", "", &shelves)
	var id int64
	for _, s := range shelves.Shelves {
		if s.Name == "music" {
			id = s.ID
		}
	}
	var scan store.ScanResult
	server.call(t, "POST", fmt.Sprintf("/shelves/%d/scan", id), "{}", &scan)
	if scan.Added != len(originals) {
		t.Fatalf("the scan found %d of %d", scan.Added, len(originals))
	}
	var r store.Run
	server.call(t, "POST", "/runs", fmt.Sprintf(`{"shelf_id":%d,"profile":"rotation","delivery":"copy"}`, id), &r)
	server.follow(t, r.ID, func(r store.Run) bool { return r.Done >= 5 })
	server.kill()

	copies := filepath.Join(data, "copies", "music")
	early, _ := visible(t, copies)
	if len(early) < 5 || len(early) >= len(originals) {
		t.Fatalf("killed with %d of %d delivered: not in the middle", len(early), len(originals))
	}
	for _, path := range early {
		inTolerance(t, path)
	}

	server = startChild(t, args...)
	server.follow(t, r.ID, func(store.Run) bool { return false })
	server.call(t, "GET", fmt.Sprintf("/runs/%d", r.ID), "", &r)
	if r.Done != len(originals) || r.State != store.RunFinished {
		t.Errorf("after the restart: %+v\n%s", r, server.log)
	}
	seen, hidden := visible(t, copies)
	if len(seen) != len(originals) || len(hidden) > 0 {
		t.Errorf("%d copies of %d, left over: %v", len(seen), len(originals), hidden)
	}
	for _, path := range seen {
		inTolerance(t, path)
	}
	for path, sum := range before {
		if hash(t, path) != sum {
			t.Errorf("%s was changed", path)
		}
	}
}

func hash(t *testing.T, path string) [32]byte {
	t.Helper()
	b, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return sha256.Sum256(b)
}

// The demonstration is the main job: it makes a ragged shelf and has to find it even afterwards.
func TestTryOnce(t *testing.T) {
	code, out, stderr := run(t, "try", "--once", "--data", t.TempDir())
	if code != exitFine {
		t.Errorf("exit code %d\n%s\n%s", code, out, stderr)
	}
	if !strings.Contains(out, "Quietest to loudest") {
		t.Errorf("no verdict in:\n%s", out)
	}
}
