package command

import (
	"bufio"
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"net"
	"net/http"
	"net/url"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"
)

// below lists everything below a folder that is not a folder itself.
func below(t *testing.T, dir string) (files []string) {
	t.Helper()
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err == nil && !d.IsDir() {
			files = append(files, path)
		}
		return err
	})
	if err != nil && !errors.Is(err, fs.ErrNotExist) {
		t.Fatal(err)
	}
	return files
}

// Ctrl-C while copies are being made: when the program returns, there is nothing half made.
func TestLevelStoppedLeavesNothing(t *testing.T) {
	in, out := t.TempDir(), t.TempDir()
	for _, name := range []string{"a.mp3", "b.mp3", "c.mp3"} {
		if err := os.Symlink(realMusic, filepath.Join(in, name)); err != nil {
			t.Fatal(err)
		}
	}
	ctx, cancel := context.WithCancelCause(t.Context())
	go func() {
		for len(below(t, out)) == 0 {
			time.Sleep(5 * time.Millisecond)
		}
		cancel(errors.New("told to stop"))
	}()
	var errs bytes.Buffer
	code := Run(ctx, []string{"level", "--profile", "rotation", "--workers", "2", "--out", out,
		filepath.Join(in, "a.mp3"), filepath.Join(in, "b.mp3"), filepath.Join(in, "c.mp3")}, io.Discard, &errs)
	if left := below(t, out); code != exitSome || len(left) > 0 || !strings.Contains(errs.String(), "told to stop") {
		t.Errorf("exit code %d, %q, left behind: %q", code, errs.String(), left)
	}
}

// nobody is an output whose reader has gone.
type nobody struct{}

func (nobody) Write([]byte) (int, error) { return 0, errors.New("broken pipe") }

// "| head -1": once nobody reads the results, no more of them are made, and nothing half made is left.
func TestLevelStopsWhenNobodyReads(t *testing.T) {
	in, out := t.TempDir(), t.TempDir()
	excerpt(t, filepath.Join(in, "a.wav"))
	for _, name := range []string{"b.mp3", "c.mp3"} {
		b, err := os.ReadFile(realMusic)
		if err != nil {
			t.Fatal(err)
		}
		write(t, filepath.Join(in, name), string(b))
	}
	var errs bytes.Buffer
	code := Run(t.Context(), []string{"level", "--profile", "rotation", "--workers", "2", "--out", out, in}, nobody{}, &errs)
	if code != exitSome || !strings.Contains(errs.String(), "broken pipe") {
		t.Errorf("exit code %d, %q", code, errs.String())
	}
	if left := below(t, out); !slices.Equal(left, []string{filepath.Join(out, "a.wav")}) {
		t.Errorf("left: %q", left)
	}
}

// Names that would drive a terminal, or read as another name on it.
func TestPrintable(t *testing.T) {
	for s, want := range map[string]string{
		"Grüße, 東京 – à la fin.wav": "Grüße, 東京 – à la fin.wav",
		"\x1b[31mred\a\r\n.wav":    "·[31mred···.wav",
		"\u009b31m":                "·31m",
		"gpj\u202evaw.exe":         "gpj·vaw.exe", // Unicode's right-to-left override
	} {
		if got := printable(s); got != want {
			t.Errorf("%q became %q, want %q", s, got, want)
		}
	}
}

// Folders in a configuration file may hold the signs that separate values on the command line.
func TestConfigTakesAnyFolderName(t *testing.T) {
	file := write(t, filepath.Join(t.TempDir(), "evenshelf.toml"),
		"shelf = { radio = '/srv/a;b', old = '/srv/x=y' }\nshelf-roots = ['/srv/c,d', '/mnt']\n")
	var c cli
	parser, err := newParser(&c, io.Discard, io.Discard, func(int) {})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := parser.Parse([]string{"--config", file, "serve"}); err != nil {
		t.Fatal(err)
	}
	if c.Serve.Shelf["radio"] != "/srv/a;b" || c.Serve.Shelf["old"] != "/srv/x=y" || !slices.Equal(c.Serve.ShelfRoots, []string{"/srv/c,d", "/mnt"}) {
		t.Errorf("shelves %v, roots %q", c.Serve.Shelf, c.Serve.ShelfRoots)
	}
}

// startServe runs the server until stop is called and the exit code is received from ended.
func startServe(t *testing.T, listen string, errs io.Writer) (at *url.URL, stop context.CancelFunc, ended <-chan int) {
	t.Helper()
	ctx, stop := context.WithCancel(t.Context())
	out, says := io.Pipe()
	code := make(chan int, 1)
	go func() { code <- Run(ctx, []string{"serve", "--listen", listen, "--data", t.TempDir()}, says, errs) }()
	line, err := bufio.NewReader(out).ReadString('\n')
	if err != nil {
		t.Fatal(err)
	}
	if at, err = url.Parse(strings.Fields(line)[3]); err != nil {
		t.Fatal(err)
	}
	return at, stop, code
}

// Every loopback address that is asked for can be used: the whole of 127.0.0.0/8 is loopback (RFC 1122, 3.2.1.3).
func TestServeAnswersAtTheAddressItNames(t *testing.T) {
	for _, listen := range []string{"127.0.0.1:0", "127.0.0.2:0"} {
		at, stop, ended := startServe(t, listen, io.Discard)
		resp, err := http.Get(at.JoinPath("healthz").String())
		if err != nil {
			t.Fatal(err)
		}
		resp.Body.Close()
		if resp.StatusCode != http.StatusOK {
			t.Errorf("%s: %s", at, resp.Status)
		}
		stop()
		<-ended
	}
}

// A client that stalls in the middle of a request neither holds up the end of the server nor makes it a failure.
func TestServeStopsWithAClientThatStalls(t *testing.T) {
	var errs bytes.Buffer
	at, stop, ended := startServe(t, "127.0.0.1:0", &errs)
	conn, err := net.Dial("tcp", at.Host)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close()
	fmt.Fprintf(conn, "POST /api/v1/runs HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\nContent-Length: 9\r\n\r\n{")
	time.Sleep(100 * time.Millisecond) // until a handler waits for the rest
	began := time.Now()
	stop()
	if code, took := <-ended, time.Since(began); code != exitFine || took > 3*lastReplies {
		t.Errorf("exit code %d after %s\n%s", code, took, errs.String())
	}
}
