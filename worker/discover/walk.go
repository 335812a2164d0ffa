// Package discover finds media files in a folder tree and makes sure that a path read later still leads
// into it.
//
// No symbolic link is followed, neither to a folder nor to a file, whether it leads out of the tree or
// not: out of it is not ours to read, and inside it the recording is found under its own name anyway.
// Files that do not look like media by their name, hidden files and folders, and folders named _held
// (doubtful copies wait there) are passed over.
package discover

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"slices"
	"strings"
	"syscall"

	"evenshelf/engine/media"
	"evenshelf/store"
)

// Held is the name of the folder that delivery keeps doubtful copies in; it is never walked.
const Held = "_held"

// Unread says which folders could not be looked into; the rest of the tree was walked.
type Unread struct {
	Folders []string // relative to the root, "" for the root itself
	Reasons []error  // one a folder
}

func (u *Unread) Error() string {
	parts := make([]string, len(u.Folders))
	for i, f := range u.Folders {
		if f == "" {
			f = "the folder itself"
		}
		parts[i] = fmt.Sprintf("%s: %v", f, u.Reasons[i])
	}
	return "could not look into " + strings.Join(parts, "; ")
}

func (u *Unread) Unwrap() []error { return u.Reasons }

// Walk calls fn with every media file below folder ("" = all of root), folder by folder, each in byte
// order of its names. It stops at the first error of fn and when ctx is done. Folders that cannot be read are
// passed over and reported together at the end as an *Unread; a root or folder that is not there, or
// that is reached through a symbolic link, is an error of its own and nothing was walked.
func Walk(ctx context.Context, root, folder string, fn func(store.FoundFile) error) error {
	r, err := os.OpenRoot(root)
	if err != nil {
		return fmt.Errorf("scan %s: %w", root, reason(err))
	}
	defer r.Close()
	top := "."
	if folder != "" {
		top = path.Clean(folder)
	}
	if err := plainFolder(r, top); err != nil {
		return fmt.Errorf("scan %s in %s: %w", folder, root, err)
	}
	w := walk{root: r, fn: fn}
	if err := w.folder(ctx, top); err != nil {
		return fmt.Errorf("scan %s: %w", root, err)
	}
	if len(w.unread.Folders) > 0 {
		return &w.unread
	}
	return nil
}

// walk goes through an os.Root, which opens nothing outside it even if the tree is changed meanwhile. (Not
// by fs.WalkDir: that refuses names that are not UTF-8, and old libraries have them.)
type walk struct {
	root   *os.Root
	fn     func(store.FoundFile) error
	unread Unread
}

func (w *walk) folder(ctx context.Context, name string) error {
	entries, err := w.list(name)
	if err != nil && !errors.Is(err, fs.ErrNotExist) { // removed while we walked: nothing to tell
		w.unread.add(name, err)
	}
	for _, e := range entries {
		if ctx.Err() != nil {
			return context.Cause(ctx)
		}
		p := path.Join(name, e.Name())
		switch {
		case strings.HasPrefix(e.Name(), ".") || e.Name() == Held && e.IsDir():
		case e.IsDir():
			if err := w.folder(ctx, p); err != nil {
				return err
			}
		case e.Type().IsRegular() && media.LooksLikeMedia(e.Name()):
			info, err := e.Info()
			if errors.Is(err, fs.ErrNotExist) {
				continue
			}
			if err != nil {
				w.unread.add(name, err)
				continue
			}
			if err := w.fn(store.FoundFile{Path: p, Size: info.Size(), ModifiedAt: info.ModTime(), Inode: inodeOf(info)}); err != nil {
				return err
			}
		}
	}
	return nil
}

// list returns what could be read of a folder, in byte order of the names, even if there was an error.
func (w *walk) list(name string) ([]fs.DirEntry, error) {
	f, err := w.root.Open(name)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	entries, err := f.ReadDir(-1)
	slices.SortFunc(entries, func(a, b fs.DirEntry) int { return strings.Compare(a.Name(), b.Name()) })
	return entries, err
}

func (u *Unread) add(folder string, err error) {
	if folder == "." {
		folder = ""
	}
	u.Folders = append(u.Folders, folder)
	u.Reasons = append(u.Reasons, reason(err))
}

// plainFolder makes sure that every step down to the folder is a folder and not a link to one.
func plainFolder(r *os.Root, folder string) error {
	if !filepath.IsLocal(folder) {
		return ErrOutside
	}
	at := "."
	for part := range strings.SplitSeq(folder, "/") {
		at = path.Join(at, part)
		info, err := r.Lstat(at)
		switch {
		case err != nil:
			return reason(err)
		case info.Mode()&fs.ModeSymlink != 0:
			return errors.New("it is reached through a symbolic link")
		case !info.IsDir():
			return errors.New("it is not a folder")
		}
	}
	return nil
}

// inodeOf is a file's number in its file system, by which it is known when it was moved; 0 where there is none.
func inodeOf(info fs.FileInfo) uint64 {
	if s, ok := info.Sys().(*syscall.Stat_t); ok {
		return s.Ino
	}
	return 0
}
