package delivery

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"strings"
	"time"

	"evenshelf/engine/level"
)

// Original is a recording that was moved to the attic when its levelled copy took its place. Hashes are
// SHA-256 of the files' bytes, in hexadecimal.
type Original struct {
	Stored   string    // where it is, relative to the attic, with forward slashes
	SHA256   string    // of the original
	Levelled string    // of the file that took its place
	Size     int64     // of the file that took its place, bytes
	Length   int64     // of the original, bytes
	Modified time.Time // of the file that took its place; only Record is told
}

// ErrChanged is wrapped when a file is neither the levelled copy that was put there nor the original.
var ErrChanged = errors.New("was changed since it was levelled")

// Place says where a replacing delivery finds and puts things. All are absolute paths but Rel.
type Place struct {
	Root   string // the shelf's
	Rel    string // the recording's path below Root, with forward slashes
	Attic  string
	Copies string // what is held goes to _held below it
	Source string // the sound to work on: Root/Rel itself, or an original in the attic
	// Ours is what the attic has of the file at Root/Rel: the original it was made from, byte for byte or by its sound;
	// nil: that file is an original.
	Ours *Original
	// Borrowed says that Ours is the original of another recording, of which this one is a second copy: it gets a name
	// of its own in the attic, and is this one's original from then on.
	Borrowed bool
}

// Record notes what is in the attic before a recording's place is taken: its original, and if what is there is neither
// that nor ours, that version too.
type Record func(ctx context.Context, original Original, version *Original) error

// Replace levels a recording and puts the copy in its place, in an order that can be cut short anywhere
// without losing the original:
//
//	level into a scratch file ─▶ link or copy the original into the attic ─▶ record(…) ─▶ rename over it
//
// A recording that was replaced before is levelled from its original, so that no sound is ever levelled
// twice. One that is within its profile stays as it is. What is held goes where held copies go, and the
// recording stays. What takes its place has its time, or is a second younger if it is as long. output is relative to Root, or to Copies if the outcome is held. Errors as for Deliver.
//
// Whatever is in the recording's place and is not, byte for byte, what was put there goes to the attic too: somebody
// has written other tags since. at.Ours is not looked at before the engine is done: whoever knows the sound may only then
// know the file.
func Replace(ctx context.Context, eng Leveller, at *Place, t level.Task, key string, record Record) (level.Outcome, string, error) {
	return replace(ctx, eng.Level, at, t, key, record)
}

// Tag writes gain tags into a recording's own file, on the path of Replace. One whose tags are right already stays as
// it is.
func Tag(ctx context.Context, eng Tagger, at *Place, t level.Task, key string, record Record) (level.Outcome, string, error) {
	return replace(ctx, eng.Tag, at, t, key, record)
}

func replace(ctx context.Context, engine maker, at *Place, t level.Task, key string, record Record) (o level.Outcome, output string, err error) {
	d, refusal, err := open(at.Source, at.Root, at.Rel, key, Options{Overwrite: true})
	if err != nil || refusal != "" {
		return failed(level.Outcome{}, refusal), "", err
	}
	defer func() { err = errors.Join(err, d.close()) }()
	target := d.path(at.Rel)
	replaced, err := os.Lstat(target)
	if err != nil {
		return o, "", err
	}
	first := at.Source == target
	if stored, err := filepath.Rel(at.Attic, at.Source); !replaced.Mode().IsRegular() || !first && (err != nil || !filepath.IsLocal(stored)) {
		// The link would be replaced, and what it leads to be taken for the original in the attic.
		return failed(level.Outcome{}, "a symbolic link leads to it now, so nothing can take its place"), "", nil
	}
	if o, err = d.make(ctx, engine, t); err != nil {
		return o, "", err
	}
	switch {
	case o.After == nil && o.Verdict.State == level.Done: // nothing to write: it is as it should be
		return o, at.Rel, nil
	case o.After == nil:
		return o, "", nil
	case o.Verdict.State == level.Held:
		output, err = d.hold(at.Copies, o.Extension)
		return o, output, err
	case !strings.EqualFold(path.Ext(at.Rel), o.Extension):
		return failed(o, notInPlace(at.Rel, o.Extension)), "", nil
	case first && o.Plan != nil && o.Plan.Untouched:
		return o, at.Rel, nil
	}
	step("made")
	kept, version, err := d.toAttic(at, target)
	if err != nil {
		return o, "", fmt.Errorf("attic: %w", err)
	}
	if kept.Levelled, kept.Size, err = digest(d.path(d.scratch)); err != nil {
		return o, "", err
	}
	if err := d.dress(target, replaced); err != nil {
		return o, "", err
	}
	kept.Modified = replaced.ModTime()
	if kept.Size == replaced.Size() {
		// Programs that back files up or copy what has changed go by length and time: with both as they were, they
		// would never see that it is another file.
		kept.Modified = kept.Modified.Add(time.Second)
		if err := d.root.Chtimes(d.scratch, time.Time{}, kept.Modified); err != nil {
			return o, "", err
		}
	}
	step("dressed")
	// The work took its time, and copying into the attic too: what somebody put there meanwhile is not in it.
	if err := Unchanged(target, replaced); err != nil {
		return o, "", err
	}
	if version != nil {
		version.Levelled, version.Size = kept.Levelled, kept.Size
	}
	if err := record(ctx, kept, version); err != nil {
		return o, "", err
	}
	step("recorded")
	if err := d.root.Rename(d.scratch, at.Rel); err != nil {
		return o, "", err
	}
	step("renamed")
	return o, at.Rel, d.syncFolder(path.Dir(at.Rel))
}

// notInPlace is why a file of another format cannot take a recording's place: whoever plays it knows it by its name.
func notInPlace(rel, extension string) string {
	return fmt.Sprintf("its levelled file would be %s, which cannot take the place of %s; delivery copy can make it", extension, path.Ext(rel))
}

// hold puts the scratch file where held copies wait.
func (d *delivery) hold(copies, extension string) (output string, err error) {
	output = path.Join(Held, d.rel)
	if !strings.EqualFold(path.Ext(d.rel), extension) {
		output += extension
	}
	if err := d.dress(d.source, d.info); err != nil {
		return "", err
	}
	sum, _, err := digest(d.path(d.scratch))
	if err != nil {
		return "", err
	}
	return output, keep(d.path(d.scratch), sum, filepath.Join(copies, filepath.FromSlash(output)))
}

// toAttic keeps what is in the recording's place, unless it is there already or we made it from what is, and returns the
// original; if what is kept is not that, it is a version.
func (d *delivery) toAttic(at *Place, target string) (original Original, version *Original, err error) {
	sum, length, err := digest(target)
	if err != nil {
		return original, nil, err
	}
	if at.Ours == nil {
		original = Original{Stored: d.stored(sum, path.Ext(d.rel)), SHA256: sum, Length: length}
		return original, nil, at.keep(target, original)
	}
	original = *at.Ours
	if at.Borrowed {
		original.Stored = d.stored(original.SHA256, path.Ext(original.Stored))
		if err := at.keep(filepath.Join(at.Attic, filepath.FromSlash(at.Ours.Stored)), original); err != nil {
			return original, nil, err
		}
	}
	switch sum {
	case original.Levelled:
		return original, nil, nil
	case original.SHA256: // put back by hand
		return original, nil, at.keep(target, original)
	}
	version = &Original{Stored: d.stored(sum, path.Ext(d.rel)), SHA256: sum, Length: length}
	return original, version, at.keep(target, *version)
}

// stored names a file in the attic. The name carries the hash, so that another recording that comes to this path later
// has a place too.
func (d *delivery) stored(sum, extension string) string {
	return strings.TrimSuffix(d.rel, path.Ext(d.rel)) + "." + sum[:12] + extension
}

// keep makes a file one in the attic.
func (at *Place) keep(from string, o Original) error {
	return keep(from, o.SHA256, filepath.Join(at.Attic, filepath.FromSlash(o.Stored)))
}

// Restore puts the original back at rel below root, bit for bit, and takes it out of the attic. It may be
// repeated after it was cut short anywhere. ErrChanged if the file there is one that we do not know.
func Restore(root, rel, attic string, kept Original, key string) error {
	r, err := os.OpenRoot(root)
	if err != nil {
		return err
	}
	defer r.Close()
	if entries, err := os.ReadDir(root); err != nil {
		return err
	} else if len(entries) == 0 { // a mount point with nothing mounted looks like this, and takes files
		return fmt.Errorf("%s is empty: is its disk mounted?", root)
	}
	d := &delivery{root: r, rel: rel, scratch: path.Join(path.Dir(rel), scratchName(path.Base(rel), key))}
	if refusal, err := d.makeFolder(path.Dir(rel)); err != nil {
		return err
	} else if refusal != "" {
		return errors.New(refusal)
	}
	stored := filepath.Join(attic, filepath.FromSlash(kept.Stored))
	now, _, err := digest(d.path(rel))
	switch {
	case err == nil && now == kept.SHA256: // cut short after the rename: only the tidying is left to do
		return removeIfThere(stored)
	case err == nil && now != kept.Levelled:
		return fmt.Errorf("%s %w; move the file away that is there now, and restore again", rel, ErrChanged)
	case err != nil && !errors.Is(err, fs.ErrNotExist):
		return err
	}
	if sum, _, err := digest(stored); err != nil {
		return err
	} else if sum != kept.SHA256 {
		return fmt.Errorf("%s: the original in the attic is damaged: %s", rel, stored)
	}
	if err := removeIfThere(d.path(d.scratch)); err != nil {
		return err
	}
	if err := keep(stored, kept.SHA256, d.path(d.scratch)); err != nil {
		return err
	}
	step("brought")
	if err := r.Rename(d.scratch, rel); err != nil {
		return errors.Join(err, removeIfThere(d.path(d.scratch)))
	}
	step("renamed")
	return errors.Join(d.syncFolder(path.Dir(rel)), removeIfThere(stored))
}

// IsLevelled reports whether the file at path is the one that took the original's place.
func (kept Original) IsLevelled(path string) bool {
	sum, _, err := digest(path)
	return err == nil && sum == kept.Levelled
}

func removeIfThere(path string) error {
	if err := os.Remove(path); !errors.Is(err, fs.ErrNotExist) {
		return err
	}
	return nil
}

// keep makes to the same file as from, whose digest is sum: by a second link, or where that cannot be
// (another file system) by a copy that is read back and compared. A file that is there with the same bytes
// is left alone.
func keep(from, sum, to string) error {
	if there, _, err := digest(to); err == nil && there == sum {
		return nil
	}
	folder := filepath.Dir(to)
	if err := makeFolders(folder); err != nil {
		return err
	}
	if err := removeIfThere(to); err != nil {
		return err
	}
	if link(from, to) != nil {
		if err := copyFile(from, to); err != nil {
			return errors.Join(err, removeIfThere(to))
		}
		step("copied")
		if there, _, err := digest(to); err != nil || there != sum {
			return errors.Join(fmt.Errorf("%s: the copy differs from its original", to), err, removeIfThere(to))
		}
	}
	step("kept")
	return syncFolder(folder)
}

// link and step are as they are for the sake of tests: those have no other file system, and the power does not go
// between two steps when it is asked to.
var (
	link = os.Link
	step = func(string) {}
)

// copyFile copies content and dress, and syncs.
func copyFile(from, to string) error {
	in, err := os.Open(from)
	if err != nil {
		return err
	}
	defer in.Close()
	info, err := in.Stat()
	if err != nil {
		return err
	}
	out, err := os.OpenFile(to, os.O_WRONLY|os.O_CREATE|os.O_EXCL, info.Mode().Perm())
	if err != nil {
		return err
	}
	step("begun")
	_, err = io.Copy(out, in)
	if err = errors.Join(err, dress(out, from, info), out.Sync(), out.Close()); err != nil {
		return err
	}
	return os.Chtimes(to, time.Time{}, info.ModTime())
}

// digest returns the SHA-256 of a file, in hexadecimal, and its length in bytes.
func digest(path string) (sum string, size int64, err error) {
	f, err := os.Open(path)
	if err != nil {
		return "", 0, err
	}
	defer f.Close()
	h := sha256.New()
	if size, err = io.Copy(h, f); err != nil {
		return "", 0, err
	}
	return hex.EncodeToString(h.Sum(nil)), size, nil
}
