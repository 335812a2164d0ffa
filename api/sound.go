package api

import (
	"cmp"
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"mime"
	"net/http"
	"os"
	"path"
	"path/filepath"
	"strings"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/media"
	"evenshelf/store"
)

// sound is an open file on its way to the client, in whole or in ranges.
type sound struct {
	file        *os.File
	info        fs.FileInfo
	disposition string
	track       *track // what is sent instead of the file; nil: nothing
}

// track is a sound track of a film on its way to a player.
type track struct {
	*media.Audition
	number int
	failed func(error) // what is told where the client no longer can be
	done   func()
}

// Read implements io.Reader.
func (t *track) Read(p []byte) (int, error) {
	n, err := t.Audition.Read(p)
	if err != nil && err != io.EOF {
		t.failed(err)
	}
	return n, err
}

// maxHeard bounds the tracks of films that are sent at a time: each has a decoder.
const maxHeard = 16

// playSound sends the recording before or after levelling for the dashboard's player.
func (a *API) playSound(c *gin.Context) (int, any, error) {
	version := c.DefaultQuery("version", "before")
	if version != "before" && version != "after" {
		return 0, nil, badRequest("", complaint{"version", fmt.Sprintf("%q is not one of before, after", version)})
	}
	status, value, err := a.openSound(c, version == "before", "inline")
	if err != nil {
		return status, value, err
	}
	s := value.(sound)
	if s.track, err = a.openTrack(c, s.file, version == "before"); err != nil {
		s.file.Close()
		return 0, nil, err
	}
	return status, s, nil
}

// openTrack opens the sound track of a film that the reading before or after is of: a player that is handed the film
// plays the one marked default, if it knows the container at all. It is nil where the file itself is to be sent.
func (a *API) openTrack(c *gin.Context, file *os.File, before bool) (*track, error) {
	id, err := pathID(c)
	if err != nil {
		return nil, err
	}
	ctx := c.Request.Context()
	reading, after, err := a.Store.Readings(ctx, id)
	if !before {
		reading = after
	}
	if err != nil || a.Media == nil || reading == nil || reading.Stored == nil || !reading.Stored.Film {
		return nil, err
	}
	if a.heard.Add(1) > maxHeard {
		a.heard.Add(-1)
		return nil, unavailable(fmt.Sprintf("%d tracks of films are being played already", maxHeard))
	}
	t := &track{number: reading.Stored.Track, done: func() { a.heard.Add(-1) }}
	t.failed = func(err error) {
		if ctx.Err() == nil {
			a.Log.WarnContext(ctx, "a track of a film cannot be played", "recording_id", id, "track", t.number, "error", err)
		}
	}
	if t.Audition, err = a.Media.Audition(ctx, file, t.number, reading.Frames); err != nil {
		t.done()
		t.failed(err)
		return nil, notFound(fmt.Sprintf("sound track %d of recording %d cannot be decoded", t.number, id))
	}
	return t, nil
}

// fetchResult sends the delivered or held result for keeping.
func (a *API) fetchResult(c *gin.Context) (int, any, error) {
	return a.openSound(c, false, "attachment")
}

func (a *API) openSound(c *gin.Context, before bool, disposition string) (int, any, error) {
	id, err := pathID(c)
	if err != nil {
		return 0, nil, err
	}
	ctx := c.Request.Context()
	recording, err := a.Store.Recording(ctx, id)
	if err != nil {
		return 0, nil, err
	}
	shelf, err := a.Store.ShelfNamed(ctx, recording.ShelfName) // Shelf would count all its recordings
	if err != nil {
		return 0, nil, err
	}
	var dir, name string
	if before {
		dir, name, err = a.fileBefore(ctx, shelf, recording)
	} else {
		dir, name, err = a.fileAfter(ctx, shelf, recording)
	}
	if err != nil {
		return 0, nil, err
	}
	if disposition == "attachment" {
		// RFC 6266: FormatMediaType writes filename*, percent-encoded, where the name is not plain ASCII.
		disposition = mime.FormatMediaType(disposition, map[string]string{"filename": path.Base(name)})
	}
	file, info, err := openInside(dir, name)
	if err != nil {
		a.Log.WarnContext(ctx, "sound cannot be opened", "recording_id", id, "folder", dir, "file", name, "error", err)
		return 0, nil, notFound(fmt.Sprintf("the file of recording %d cannot be opened: %s", id, inWords(err)))
	}
	return http.StatusOK, sound{file, info, disposition, nil}, nil
}

// fileBefore is the file that the before reading is of, so that ear and eye judge the same sound: the one on
// the shelf or, where a levelled file took its place, the original in the attic.
func (a *API) fileBefore(ctx context.Context, shelf store.Shelf, r store.Recording) (dir, name string, err error) {
	original, err := a.original(ctx, r.ID)
	if err != nil {
		return "", "", err
	}
	measured := false
	if original != nil {
		if measured, err = a.wasMeasured(ctx, r, *original); err != nil {
			return "", "", err
		}
	}
	if measured {
		return shelf.Attic(), original.Stored, nil
	}
	return shelf.Root, r.Path, nil
}

// wasMeasured reports whether the before reading is of the original in the attic: it was taken by the job that
// moved it there, or by a later one that levelled it again without taking the place of the first levelled file
// (a copy, or a replacing that was held or failed). A job that only measures reads the file on the shelf.
func (a *API) wasMeasured(ctx context.Context, r store.Recording, original store.Original) (bool, error) {
	reading, _, err := a.Store.Readings(ctx, r.ID)
	if err != nil || reading == nil || reading.JobID == original.JobID {
		return err == nil && reading != nil, err
	}
	job, err := a.Store.Job(ctx, reading.JobID)
	if err != nil || r.Size != original.Size { // another size: somebody's new file
		return false, err
	}
	run, err := a.Store.Run(ctx, job.RunID)
	return run.Delivery == store.Copy || run.Delivery == store.Replace && job.State != store.Done, err
}

// fileAfter is what the recording's newest delivering job made. What took the original's place is gone once
// the original is brought back or the file is changed; both clear the after reading.
func (a *API) fileAfter(ctx context.Context, shelf store.Shelf, r store.Recording) (dir, name string, err error) {
	jobs, err := a.Store.RecordingJobs(ctx, r.ID)
	if err != nil {
		return "", "", err
	}
	job, ok := latestDelivery(jobs)
	if !ok {
		return "", "", notFound(fmt.Sprintf("no copy of recording %d has been made", r.ID))
	}
	run, err := a.Store.Run(ctx, job.RunID)
	if err != nil {
		return "", "", err
	}
	if run.Delivery != store.Replace || job.State != store.Done {
		return shelf.Copies, job.Output, nil
	}
	_, reading, err := a.Store.Readings(ctx, r.ID)
	if err != nil {
		return "", "", err
	}
	if reading == nil || reading.JobID != cmp.Or(job.SameAs, job.ID) {
		return "", "", notFound(fmt.Sprintf("recording %d has no levelled file now", r.ID))
	}
	return shelf.Root, r.Path, nil // where it was delivered, or moved since
}

// latestDelivery is the recording's newest job that delivered a file.
func latestDelivery(jobs []store.Job) (latest store.Job, ok bool) {
	for _, j := range jobs {
		if j.Output != "" && (!ok || j.ID > latest.ID) {
			latest, ok = j, true
		}
	}
	return latest, ok
}

var errNotAFile = errors.New("not a regular file")

// openInside opens a regular file strictly inside dir: absolute names, "..", and symbolic links that lead out
// are errors. It looks before it opens, because opening a named pipe would wait for a writer.
func openInside(dir, name string) (*os.File, fs.FileInfo, error) {
	root, err := os.OpenRoot(dir)
	if err != nil {
		return nil, nil, err
	}
	defer root.Close()
	name = filepath.FromSlash(name)
	if info, err := root.Stat(name); err != nil {
		return nil, nil, err
	} else if !info.Mode().IsRegular() {
		return nil, nil, errNotAFile
	}
	f, err := root.Open(name)
	if err != nil {
		return nil, nil, err
	}
	info, err := f.Stat() // of what was opened, not of what was looked at
	if err == nil && !info.Mode().IsRegular() {
		err = errNotAFile
	}
	if err != nil {
		f.Close()
		return nil, nil, err
	}
	return f, info, nil
}

// inWords says why a file did not open, without its path.
func inWords(err error) string {
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return "it is no longer there"
	case errors.Is(err, fs.ErrPermission):
		return "permission denied"
	case errors.Is(err, errNotAFile):
		return "it is not a regular file"
	}
	return "it is not a readable file inside the shelf's folder"
}

func (s sound) send(c *gin.Context, _ int) error {
	defer s.file.Close()
	var content io.ReadSeeker = s.file
	kind, tag := soundType(s.info.Name()), fmt.Sprintf("%x-%x", s.info.Size(), s.info.ModTime().UnixNano())
	if s.track != nil {
		defer s.track.done()
		defer s.track.Close()
		content, kind, tag = s.track, soundTypes[".wav"], fmt.Sprintf("%s-%d", tag, s.track.number)
		if strings.Contains(c.GetHeader("Range"), ",") { // each would start a decoder
			c.Request.Header.Del("Range")
		}
	}
	c.Header("Content-Type", kind)
	c.Header("Content-Disposition", s.disposition)
	c.Header("Cache-Control", "no-cache") // the copy may be made again under the same address
	c.Header("ETag", `"`+tag+`"`)
	http.ServeContent(patientResponse{c.Writer, patient(c)}, c.Request, "", s.info.ModTime(), content)
	return nil
}

// patientResponse is a ResponseWriter whose body is written patiently.
type patientResponse struct {
	http.ResponseWriter
	body patientWriter
}

func (p patientResponse) Write(b []byte) (int, error) { return p.body.Write(b) }

// soundTypes gives the content types browsers know. The list is ours because the system's differs from
// machine to machine; what is not on it is downloaded, never shown.
var soundTypes = map[string]string{
	".wav": "audio/wav", ".wave": "audio/wav", ".bwf": "audio/wav", ".rf64": "audio/wav",
	".flac": "audio/flac", ".mp3": "audio/mpeg", ".mp2": "audio/mpeg",
	".ogg": "audio/ogg", ".oga": "audio/ogg", ".opus": "audio/ogg",
	".m4a": "audio/mp4", ".m4b": "audio/mp4", ".mp4": "audio/mp4", ".aac": "audio/aac",
	".aif": "audio/aiff", ".aiff": "audio/aiff", ".aifc": "audio/aiff",
	".mka": "audio/x-matroska", ".webm": "audio/webm", ".wma": "audio/x-ms-wma",
	".ac3": "audio/ac3", ".eac3": "audio/eac3", ".caf": "audio/x-caf",
}

func soundType(name string) string {
	if t, ok := soundTypes[strings.ToLower(path.Ext(name))]; ok {
		return t
	}
	return "application/octet-stream"
}
