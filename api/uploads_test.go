package api

import (
	"bytes"
	"fmt"
	"io"
	"io/fs"
	"mime/multipart"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"
	"unicode"
	"unicode/utf8"

	"evenshelf/store"
)

// multipartForm builds a form of field, file name, content triples.
func multipartForm(t *testing.T, parts ...string) (body, contentType string) {
	t.Helper()
	var b bytes.Buffer
	w := multipart.NewWriter(&b)
	for p := range slices.Chunk(parts, 3) {
		f, err := w.CreateFormFile(p[0], p[1])
		if err != nil {
			t.Fatal(err)
		}
		if _, err := io.WriteString(f, p[2]); err != nil {
			t.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		t.Fatal(err)
	}
	return b.String(), w.FormDataContentType()
}

func (h *house) send(parts ...string) reply {
	h.t.Helper()
	body, contentType := multipartForm(h.t, parts...)
	return h.ask(http.MethodPost, at("/shelves/%d/uploads", h.inbox.ID), body, "Content-Type", contentType)
}

// onDisk returns the names in the upload folder.
func (h *house) onDisk() (names []string) {
	h.t.Helper()
	entries, err := os.ReadDir(h.inbox.Root)
	if err != nil {
		h.t.Fatal(err)
	}
	for _, e := range entries {
		names = append(names, e.Name())
	}
	return names
}

func TestUploadKeepsRecordingsAndRefusesTheRest(t *testing.T) {
	h := open(t, nil)
	r := h.send("files", "take.wav", "first", "files", "take.wav", "second", "files", "notes.txt", "words", "files", "empty.wav", "",
		"files", "big.wav", strings.Repeat("x", 1001), "files", "exact.wav", strings.Repeat("y", 1000), "other", "stray.wav", "z", "files", "...", "dots",
		"files", "C:\\music\\ \\..\\.\u202ehidden.mp3", "renamed")
	var got uploaded
	r.into(t, 201, &got)
	var paths []string
	for _, rec := range got.Recordings {
		paths = append(paths, rec.Path)
		if rec.ShelfID != h.inbox.ID || rec.ID == 0 {
			t.Errorf("%+v", rec)
		}
	}
	want := []string{"take.wav", "take (2).wav", "exact.wav", "hidden.mp3"}
	if !slices.Equal(paths, want) {
		t.Errorf("recordings %q, want %q", paths, want)
	}
	reasons := map[string]string{}
	for _, f := range got.Refused {
		reasons[f.Name] = f.Reason
	}
	for name, part := range map[string]string{"notes.txt": "not a kind of recording", "empty.wav": "empty", "big.wav": "larger than 1000 bytes",
		"stray.wav": `field "files"`, "files": "no usable"} {
		if !strings.Contains(reasons[name], part) {
			t.Errorf("%s: %q does not say %q", name, reasons[name], part)
		}
	}
	slices.Sort(want)
	if got := h.onDisk(); !slices.Equal(got, want) {
		t.Errorf("on disk %q", got)
	}
	for name, content := range map[string]string{"take.wav": "first", "take (2).wav": "second"} {
		if b, err := os.ReadFile(filepath.Join(h.inbox.Root, name)); err != nil || string(b) != content {
			t.Errorf("%s holds %q, %v", name, b, err)
		}
	}
	var again uploaded
	h.send("files", "take.wav", "third").into(t, 201, &again)
	if again.Recordings[0].Path != "take (3).wav" {
		t.Errorf("third take is %q", again.Recordings[0].Path)
	}
}

func TestUploadOfNothing(t *testing.T) {
	h := open(t, nil)
	h.send("files", "notes.txt", "words").wantProblem(t, kindInvalid, `"notes.txt": it is not a kind of recording`)
	h.send().wantProblem(t, kindInvalid, "at least one file")
	address := at("/shelves/%d/uploads", h.inbox.ID)
	h.ask(http.MethodPost, address, "{}").wantProblem(t, kindMediaType, "multipart")
	h.ask(http.MethodPost, address, "rubbish", "Content-Type", "multipart/form-data; boundary=x").wantProblem(t, kindBadRequest, "")
	if left := h.onDisk(); left != nil {
		t.Errorf("left behind: %q", left)
	}
}

func TestOriginalsAreNeverWrittenTo(t *testing.T) {
	h := open(t, nil)
	body, contentType := multipartForm(t, "files", "a.wav", "a")
	r := h.ask(http.MethodPost, at("/shelves/%d/uploads", h.shelf.ID), body, "Content-Type", contentType)
	r.wantProblem(t, kindReadOnly, "holds originals")
	if _, err := os.Stat(filepath.Join(h.shelf.Root, "a.wav")); err == nil {
		t.Error("the file was written all the same")
	}
	none := open(t, func(o *Options) { o.UploadDir = "" })
	none.send("files", "a.wav", "a").wantProblem(t, kindReadOnly, "")
}

// A client that breaks off leaves no torn file, and what had arrived whole is a recording.
func TestUploadThatBreaksOff(t *testing.T) {
	h := open(t, nil)
	body, contentType := multipartForm(t, "files", "whole.wav", "whole", "files", "torn.wav", "this one never arrives in full")
	conn, err := net.Dial("tcp", strings.TrimPrefix(h.url, "http://"))
	if err != nil {
		t.Fatal(err)
	}
	head := "POST " + at("/shelves/%d/uploads", h.inbox.ID) + " HTTP/1.1\r\nHost: localhost\r\nContent-Type: " + contentType + "\r\nContent-Length: 99999\r\n\r\n"
	if _, err := io.WriteString(conn, head+body[:strings.Index(body, "in full")]); err != nil {
		t.Fatal(err)
	}
	if err := conn.(*net.TCPConn).CloseWrite(); err != nil {
		t.Fatal(err)
	}
	if err := conn.SetReadDeadline(time.Now().Add(10 * time.Second)); err != nil {
		t.Fatal(err)
	}
	if answer, err := io.ReadAll(conn); err != nil || !strings.Contains(string(answer), "broke off") {
		t.Errorf("%v %s", err, answer)
	}
	conn.Close()
	if got := h.onDisk(); !slices.Equal(got, []string{"whole.wav"}) {
		t.Errorf("on disk %q", got)
	}
	page, err := h.db.Recordings(t.Context(), store.RecordingQuery{ShelfID: h.inbox.ID})
	if err != nil || page.Total != 1 {
		t.Errorf("%v %+v", err, page)
	}
}

func TestUploadPastTheLimitOfTheWhole(t *testing.T) {
	h := open(t, nil)
	r := h.send("files", "a.wav", "fine", "files", "b.wav", strings.Repeat("x", 3<<20))
	r.wantProblem(t, kindTooLarge, "1.0 MiB")
	if got := h.onDisk(); !slices.Equal(got, []string{"a.wav"}) {
		t.Errorf("on disk %q", got)
	}
	if got := wholeLimit(1 << 62); got != 1<<63-1 {
		t.Errorf("limit overflows to %d", got)
	}
}

func TestUnfinishedUploadsAreSwept(t *testing.T) {
	dir := t.TempDir()
	for _, name := range []string{scratchPrefix + "abc", "kept.wav"} {
		if err := os.WriteFile(filepath.Join(dir, name), []byte("x"), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	if err := sweepUploads(dir); err != nil {
		t.Fatal(err)
	}
	if left, err := os.ReadDir(dir); err != nil || len(left) != 1 || left[0].Name() != "kept.wav" {
		t.Errorf("%v %v", left, err)
	}
	if err := sweepUploads(filepath.Join(dir, "not-made-yet")); err != nil {
		t.Error(err)
	}
}

func TestCleanName(t *testing.T) {
	for name, want := range map[string]string{
		"song.wav": "song.wav", "a/b/song.wav": "song.wav", `a\b\song.wav`: "song.wav", "../../etc/passwd": "passwd", "..": "", ".": "", "": "",
		".hidden.wav": "hidden.wav", "  song .wav": "song.wav", "song.wav. ": "song.wav", "a\x00b\n.wav": "ab.wav", "tab\there.wav": "tab here.wav",
		"ملف.wav": "ملف.wav", "\u202eevil.wav": "evil.wav", "a\xffb.wav": "a_b.wav", "می\u200cخواهم.mp3": "می\u200cخواهم.mp3", "/": "", "a/": "",
		strings.Repeat("é", 200) + ".flac": strings.Repeat("é", 97) + ".flac",
	} {
		if got := cleanName(name); got != want {
			t.Errorf("%q: %q, want %q", name, got, want)
		}
	}
}

func FuzzCleanName(f *testing.F) {
	for _, seed := range []string{"a.wav", "../x", "\x00", ".\u202e.", strings.Repeat("é", 300), "a." + strings.Repeat("b", 300), "\u200d"} {
		f.Add(seed)
	}
	f.Fuzz(func(t *testing.T, in string) {
		out := cleanName(in)
		bad := strings.ContainsAny(out, "/\\") || strings.HasPrefix(out, ".") || len(out) > nameBytes || !utf8.ValidString(out) ||
			strings.ContainsFunc(out, unicode.IsControl) || out != "" && !filepath.IsLocal(out)
		if bad {
			t.Errorf("%q becomes %q", in, out)
		}
		if again := cleanName(out); again != out {
			t.Errorf("%q becomes %q, then %q", in, out, again)
		}
	})
}

// As many files as one upload may hold are taken.
func TestUploadAsManyAsAllowed(t *testing.T) {
	h := open(t, nil)
	var parts []string
	for i := range maxFiles {
		parts = append(parts, "files", fmt.Sprintf("%04d.wav", i), "sound")
	}
	if got := h.send(parts...); got.status != http.StatusCreated || len(h.onDisk()) != maxFiles {
		t.Errorf("%d, %d on disk: %.200s", got.status, len(h.onDisk()), got.body)
	}
}

// The person who uploads can do something about a full disk, if told.
func TestUploadOntoAFullDisk(t *testing.T) {
	full := &fs.PathError{Op: "write", Path: "/secret/place", Err: syscall.ENOSPC}
	p := problemOf(brokenUpload(fmt.Errorf("keep: %w", full)))
	if p.Status != http.StatusServiceUnavailable || !strings.Contains(p.Detail, "no space") || strings.Contains(p.Detail, "secret") {
		t.Errorf("%+v", p)
	}
}
