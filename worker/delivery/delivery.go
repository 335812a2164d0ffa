// Package delivery puts a levelled copy where it belongs, complete or not at all.
//
// The engine writes to a scratch file in the folder the copy goes to, so that the last step is a rename
// within one file system, which happens or does not. The scratch file's name is made from the job's key:
// a job that is started again after a crash finds and replaces what it left behind.
//
//	music/a.wav  ─▶  <copies>/music/.a.wav.evenshelf-<key>.part  ─▶  <copies>/music/a.wav         done
//	                                                              ─▶  <copies>/_held/music/a.wav   held
//
// A copy keeps the path of its recording. If the format differs, the new extension is added rather than
// exchanged ("a.ogg.flac"), so that a.ogg and a.wav never meet in one file. What is held goes to a tree
// of its own, so that nothing doubtful lands where a playout system looks. Replace (attic.go) puts the copy
// in its recording's place instead, once the original is safe.
//
// A source is never written to: not under another name of it (hard link), not through a link, not by a
// copies folder that turns out to be the source's own. All changes go through os.Root, which does not
// follow a link out of the copies folder.
package delivery

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"strings"
	"syscall"

	"evenshelf/engine/level"
)

// Held is the folder, at the top of the output folder, that doubtful copies wait in. (discover passes it
// over under the same name.)
const Held = "_held"

// Leveller is the part of the engine that delivery needs. Level writes the levelled sound to scratch and
// syncs it, or leaves nothing there if its outcome has no After. An error means what may heal.
type Leveller interface {
	Level(ctx context.Context, source string, t level.Task, scratch string) (level.Outcome, error)
}

// Tagger is the part of the engine that Tag needs: like Leveller, but the copy differs only in its gain tags.
type Tagger interface {
	Tag(ctx context.Context, source string, t level.Task, scratch string) (level.Outcome, error)
}

// maker makes a scratch file: Leveller.Level or Tagger.Tag.
type maker func(ctx context.Context, source string, t level.Task, scratch string) (level.Outcome, error)

// Options says what delivery may do.
type Options struct {
	// Overwrite says that the output folder is ours: a copy that is there already is replaced, and a held
	// one is removed when the new result is done.
	// Otherwise a copy that is there already is never touched and the outcome is failed.
	Overwrite bool
}

// Deliver levels the recording at source into outDir, which is made, and returns where the copy went,
// relative to outDir ("" if nothing was delivered). relPath is the recording's path on its shelf, with
// forward slashes; key tells jobs apart, 1 to 40 of a-z, 0-9 and -, and is the same whenever a job is repeated.
//
// An error means that trying again may help; what cannot be mended is an outcome with the verdict failed.
// In both cases, and if the engine panics, no scratch file is left.
func Deliver(ctx context.Context, eng Leveller, source, outDir, relPath string, t level.Task, key string, opt Options) (o level.Outcome, output string, err error) {
	d, refusal, err := open(source, outDir, relPath, key, opt)
	if err != nil || refusal != "" {
		return failed(level.Outcome{}, refusal), "", err
	}
	defer func() { err = errors.Join(err, d.close()) }()
	if o, err = d.make(ctx, eng.Level, t); err != nil || o.After == nil {
		return o, "", err
	}
	output, refusal, err = d.place(o)
	if refusal != "" {
		o = failed(o, refusal)
	}
	return o, output, err
}

func failed(o level.Outcome, reason string) level.Outcome {
	o.After, o.Extension = nil, ""
	o.Verdict = level.Verdict{State: level.Failed, Reason: reason}
	return o
}

// delivery is one recording on its way. All paths but source are relative to the output folder.
type delivery struct {
	opt     Options
	root    *os.Root
	source  string
	info    fs.FileInfo // of the source
	rel     string
	scratch string
}

// open checks everything that can be checked before the engine does its work. A refusal is the reason for
// a failed outcome.
func open(source, outDir, rel, key string, opt Options) (d *delivery, refusal string, err error) {
	if !filepath.IsLocal(rel) || rel != path.Clean(rel) || rel == "." {
		return nil, fmt.Sprintf("%q is not a path inside a folder", rel), nil
	}
	if strings.HasPrefix(rel, Held+"/") {
		return nil, fmt.Sprintf("the folder name %s is taken for copies that are held", Held), nil
	}
	if !validKey.MatchString(key) {
		return nil, "", fmt.Errorf("delivery key %q is not 1 to 40 of a-z, 0-9 and -", key)
	}
	info, err := os.Stat(source)
	if err != nil {
		return nil, "", err
	}
	if err := os.MkdirAll(outDir, 0o755); err != nil {
		return nil, "", err
	}
	if err := enoughSpace(outDir, info.Size()); err != nil {
		return nil, "", err
	}
	root, err := os.OpenRoot(outDir)
	if err != nil {
		return nil, "", err
	}
	d = &delivery{opt: opt, root: root, source: source, info: info, rel: rel,
		scratch: path.Join(path.Dir(rel), scratchName(path.Base(rel), key))}
	if refusal, err := d.prepare(); refusal != "" || err != nil {
		return nil, refusal, errors.Join(err, root.Close())
	}
	return d, "", nil
}

// prepare makes the folder for the scratch file and clears its name.
func (d *delivery) prepare() (refusal string, err error) {
	if refusal, err := d.makeFolder(path.Dir(d.rel)); refusal != "" || err != nil {
		return refusal, err
	}
	// The target cannot be checked yet: its name is known when its extension is.
	if refusal := d.refuses(d.scratch); refusal != "" {
		return refusal, nil
	}
	// What a crash left is unlinked, not truncated: it could be a link to something.
	if err := d.root.Remove(d.scratch); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return noWay(err)
	}
	// That there can be one is found out now, rather than after minutes of work.
	f, err := d.root.OpenFile(d.scratch, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
	if err != nil {
		return noWay(err)
	}
	return "", errors.Join(f.Close(), d.root.Remove(d.scratch))
}

// noWay makes a refusal of an error that says that a folder is not to be written to, which does not heal by itself.
func noWay(err error) (refusal string, _ error) {
	for _, why := range []error{syscall.EACCES, syscall.EPERM, syscall.EROFS} {
		if errors.Is(err, why) {
			return fmt.Sprintf("its folder cannot be written to (%s)", why), nil
		}
	}
	return "", err
}

// make has the engine make the scratch file. If there is nothing to deliver the outcome has no After.
func (d *delivery) make(ctx context.Context, engine maker, t level.Task) (level.Outcome, error) {
	o, err := engine(ctx, d.source, t, d.path(d.scratch))
	if err != nil {
		return o, fmt.Errorf("level %s: %w", d.rel, err)
	}
	if err := Unchanged(d.source, d.info); err != nil {
		return o, err
	}
	if o.Verdict.State != level.Done && o.Verdict.State != level.Held {
		o.After = nil
	}
	return o, nil
}

// path is where a name relative to the output folder is.
func (d *delivery) path(name string) string {
	return filepath.Join(d.root.Name(), filepath.FromSlash(name))
}

// close removes the scratch file if it is still there: after any error, a panic, or a change of mind.
func (d *delivery) close() error {
	err := d.root.Remove(d.scratch)
	if errors.Is(err, fs.ErrNotExist) {
		err = nil
	}
	return errors.Join(err, d.root.Close())
}

// place moves the scratch file to where the verdict says.
func (d *delivery) place(o level.Outcome) (output, refusal string, err error) {
	name := d.rel
	if !strings.EqualFold(path.Ext(name), o.Extension) {
		name += o.Extension
		if _, err := os.Lstat(d.source + o.Extension); err == nil {
			return "", fmt.Sprintf("its copy would take the name of another recording's, %s", name), nil
		}
	}
	target, held := name, path.Join(Held, name)
	if o.Verdict.State == level.Held {
		target = held
	}
	if refusal := d.refuses(target); refusal != "" {
		return "", refusal, nil
	}
	if refusal, err := d.makeFolder(path.Dir(target)); refusal != "" || err != nil {
		return "", refusal, err
	}
	if err := d.dress(d.source, d.info); err != nil {
		return "", "", fmt.Errorf("deliver %s: %w", name, err)
	}
	if refusal, err := d.move(target); refusal != "" || err != nil {
		return "", refusal, err
	}
	// A copy that was done before stays where a playout system may need it, also when a new one is held.
	if d.opt.Overwrite && target != held {
		if err := d.removeStale(held); err != nil {
			return "", "", err
		}
	}
	return target, "", d.syncFolder(path.Dir(target))
}

// refuses returns why nothing may be written under a name: it is the source, or it is taken.
func (d *delivery) refuses(name string) string {
	info, err := d.root.Stat(name)
	if err != nil { // nothing there, or a link out of the folder; a rename replaces the link, not what it leads to
		return ""
	}
	switch {
	case os.SameFile(info, d.info):
		return fmt.Sprintf("its copy would overwrite the recording itself (%s)", d.source)
	case info.IsDir():
		return fmt.Sprintf("there is a folder where its copy should go, %s", name)
	case !d.opt.Overwrite && name != d.scratch:
		return fmt.Sprintf("%s is already there", name)
	}
	return ""
}

// move renames the scratch file to the target. Without leave to overwrite it links instead, which fails if
// the name was taken meanwhile; where links are not to be had, the check just before has to do.
func (d *delivery) move(target string) (refusal string, err error) {
	if !d.opt.Overwrite {
		err := d.root.Link(d.scratch, target)
		if err == nil {
			return "", nil // close removes the scratch name
		}
		if errors.Is(err, fs.ErrExist) {
			return fmt.Sprintf("%s is already there", target), nil
		}
	}
	return "", d.root.Rename(d.scratch, target)
}

// removeStale removes the copy that the new result puts out of date. Only a regular file that is not the
// source is ours to remove.
func (d *delivery) removeStale(name string) error {
	info, err := d.root.Lstat(name)
	if err != nil || !info.Mode().IsRegular() || os.SameFile(info, d.info) {
		return nil
	}
	if err := d.root.Remove(name); err != nil {
		return fmt.Errorf("remove the copy that is out of date: %w", err)
	}
	return d.syncFolder(path.Dir(name))
}
