package api

import (
	"context"
	"crypto/rand"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"mime/multipart"
	"net/http"
	"os"
	"path/filepath"
	"syscall"
	"time"

	"github.com/gin-gonic/gin"

	"evenshelf/store"
)

const (
	uploadPath = "/api/v1/shelves/:id/uploads"
	// scratchPrefix marks files still on their way in. The leading dot keeps scans from seeing them.
	scratchPrefix = ".upload-"
	// maxFiles and maxWhole bound one request: so many files, so many times the limit of one file.
	maxFiles = 1000
	maxWhole = 16
)

// uploaded says what became of each file of an upload.
type uploaded struct {
	Recordings []store.Recording `json:"recordings"`
	Refused    []refusal         `json:"refused"`
}

// refusal is a file that was not taken; nothing of it is kept.
type refusal struct {
	Name   string `json:"name"`
	Reason string `json:"reason"`
}

// upload takes files into the upload shelf. Each is streamed to a scratch file, synced and given its name, so
// a file on the shelf is always whole; then the shelf is scanned, and what the scan does not recognise as a
// recording is taken out again.
func (a *API) upload(c *gin.Context) (int, any, error) {
	shelf, err := a.pathShelf(c)
	if err != nil {
		return 0, nil, err
	}
	if !a.takesUploads(shelf.Shelf) {
		return 0, nil, kindReadOnly.with(fmt.Sprintf("shelf %q holds originals; only the upload shelf takes new files", shelf.Name))
	}
	rc := http.NewResponseController(c.Writer)
	c.Request.Body = http.MaxBytesReader(c.Writer, struct {
		io.Reader
		io.Closer
	}{patientReader{c.Request.Body, rc}, c.Request.Body}, wholeLimit(a.UploadLimit))
	parts, err := c.Request.MultipartReader()
	if err != nil {
		return 0, nil, kindMediaType.with(`the body has to be multipart/form-data with files in the field "files"`)
	}
	root, err := os.OpenRoot(shelf.Root)
	if err != nil {
		return 0, nil, fmt.Errorf("open upload folder: %w", err)
	}
	defer root.Close()

	names, refused, readErr := a.receive(root, parts)
	_ = rc.SetReadDeadline(time.Time{}) // the body is in; what follows may take its time
	// What arrived whole stays, even when the client broke off after it: hence a context of its own.
	ctx, cancel := context.WithTimeout(context.WithoutCancel(c.Request.Context()), 10*time.Minute)
	defer cancel()
	recordings, strangers, err := a.register(ctx, root, shelf.ID, names)
	if err = errors.Join(readErr, err); err != nil {
		return 0, nil, err
	}
	refused = append(refused, strangers...)
	if len(recordings) == 0 {
		errs := []complaint{}
		for _, r := range refused {
			errs = append(errs, complaint{"files", fmt.Sprintf("%q: %s", r.Name, r.Reason)})
		}
		if len(errs) == 0 {
			errs = append(errs, complaint{"files", "has to hold at least one file"})
		}
		return 0, nil, invalid(errs...)
	}
	return http.StatusCreated, uploaded{recordings, list(refused)}, nil
}

// takesUploads reports whether the shelf is the one that lives in the upload folder.
func (a *API) takesUploads(shelf store.Shelf) bool {
	if a.UploadDir == "" {
		return false
	}
	dir, err := filepath.EvalSymlinks(a.UploadDir)
	return err == nil && dir == shelf.Root
}

func wholeLimit(one int64) int64 {
	if one > (1<<63-1)/maxWhole {
		return 1<<63 - 1
	}
	return max(one*maxWhole, 1<<20) // room for the form's own bytes
}

// receive stores the files of a form and returns the names they got. An error ends the form, but the names
// that were reached before it count.
func (a *API) receive(root *os.Root, parts *multipart.Reader) (names []string, refused []refusal, err error) {
	for n := 0; ; n++ {
		part, err := parts.NextPart()
		switch {
		case err == io.EOF:
			return names, refused, nil
		case err != nil:
			return names, refused, brokenUpload(err)
		case n == maxFiles:
			return names, refused, kindTooLarge.with(fmt.Sprintf("more than %d files in one upload; the first ones were taken", maxFiles))
		}
		name, reason, err := a.keep(root, part)
		if err != nil {
			return names, refused, err
		}
		if reason != "" {
			refused = append(refused, refusal{shownName(part), reason})
			continue
		}
		names = append(names, name)
	}
}

// keep stores one file under a free name, or says why it is not taken.
func (a *API) keep(root *os.Root, part *multipart.Part) (name, reason string, err error) {
	if part.FormName() != "files" || part.FileName() == "" {
		return "", `files have to be in the form field "files"`, nil
	}
	wish := cleanName(part.FileName())
	if wish == "" {
		return "", "its name has no usable characters", nil
	}
	scratch := scratchPrefix + rand.Text()
	size, err := writeScratch(root, scratch, io.LimitReader(part, a.UploadLimit+1))
	defer func() {
		if err != nil || reason != "" {
			_ = root.Remove(scratch) // may never have been made
		}
	}()
	switch {
	case err != nil:
		return "", "", brokenUpload(err)
	case size > a.UploadLimit:
		return "", "it is larger than " + bytesInWords(a.UploadLimit), nil
	case size == 0:
		return "", "it is empty", nil
	}
	if name, err = settle(root, scratch, wish); err != nil {
		return "", "", brokenUpload(err)
	}
	return name, "", nil
}

// writeScratch copies src into a new file and syncs it.
func writeScratch(root *os.Root, name string, src io.Reader) (size int64, err error) {
	f, err := root.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
	if err != nil {
		return 0, err
	}
	size, err = io.Copy(f, src)
	if err == nil {
		err = f.Sync()
	}
	return size, errors.Join(err, f.Close())
}

// settle gives the scratch file the wished name, or the first free one after it, and syncs the folder. An
// exclusive create claims the name: a rename alone would replace what another upload put there.
func settle(root *os.Root, scratch, wish string) (string, error) {
	for n := 1; ; n++ {
		name := numbered(wish, n)
		claim, err := root.OpenFile(name, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
		if errors.Is(err, fs.ErrExist) {
			continue
		}
		if err != nil {
			return "", err
		}
		if err = errors.Join(claim.Close(), root.Rename(scratch, name)); err != nil {
			return "", errors.Join(err, root.Remove(name))
		}
		return name, syncFolder(root)
	}
}

func syncFolder(root *os.Root) error {
	dir, err := root.Open(".")
	if err != nil {
		return err
	}
	return errors.Join(dir.Sync(), dir.Close())
}

// register scans the shelf and returns the recordings that the stored files became. A file that the scan
// passed over is not media; it is removed and named among the strangers.
func (a *API) register(ctx context.Context, root *os.Root, shelfID int64, names []string) (recordings []store.Recording, strangers []refusal, err error) {
	if len(names) == 0 {
		return nil, nil, nil
	}
	if _, err := a.Queue.Scan(ctx, shelfID, ""); err != nil {
		return nil, nil, fmt.Errorf("scan uploads: %w", err)
	}
	for _, name := range names {
		r, err := a.recordingAt(ctx, shelfID, name)
		if errors.Is(err, store.ErrNotFound) {
			if err := root.Remove(name); err != nil {
				return nil, nil, fmt.Errorf("remove upload that is not media: %w", err)
			}
			strangers = append(strangers, refusal{name, "it is not a kind of recording that can be read here"})
			continue
		}
		if err != nil {
			return nil, nil, err
		}
		recordings = append(recordings, r)
	}
	return recordings, strangers, nil
}

// recordingAt finds a recording by its exact path. The store searches for substrings, so the page may hold
// others too.
func (a *API) recordingAt(ctx context.Context, shelfID int64, path string) (store.Recording, error) {
	q := store.RecordingQuery{ShelfID: shelfID, Search: path, Limit: pageLimit}
	for {
		page, err := a.Store.Recordings(ctx, q)
		if err != nil {
			return store.Recording{}, err
		}
		for _, r := range page.Recordings {
			if r.Path == path {
				return r, nil
			}
		}
		if q.Cursor = page.Next; q.Cursor == "" {
			return store.Recording{}, store.ErrNotFound
		}
	}
}

// brokenUpload tells a disk that cannot be written (ours to mend) from a form that cannot be read.
func brokenUpload(err error) error {
	var disk *fs.PathError
	var tooLarge *http.MaxBytesError
	switch {
	case errors.As(err, &tooLarge):
		return err
	case errors.Is(err, syscall.ENOSPC), errors.Is(err, syscall.EDQUOT):
		return unavailable("there is no space left for uploads; files that had arrived whole are kept")
	case errors.As(err, &disk), errors.As(err, new(*os.LinkError)):
		return fmt.Errorf("write upload: %w", err)
	}
	return badRequest("the upload broke off or is not a well-formed form; files that had arrived whole are kept")
}

// sweepUploads removes scratch files that a killed process left in the upload folder.
func sweepUploads(dir string) error {
	if dir == "" {
		return nil
	}
	entries, err := os.ReadDir(dir)
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	for _, e := range entries {
		if ok, _ := filepath.Match(scratchPrefix+"*", e.Name()); ok && e.Type().IsRegular() {
			err = errors.Join(err, os.Remove(filepath.Join(dir, e.Name())))
		}
	}
	return err
}
