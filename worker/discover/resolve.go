package discover

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
)

var (
	// ErrOutside is wrapped for a path that does not stay inside its root.
	ErrOutside = errors.New("leads outside the folder")
	// ErrMissing is wrapped for a file that is not there although its root is.
	ErrMissing = errors.New("is not there")
	// ErrNotFile is wrapped for a folder, pipe, device or socket; reading one could block for ever.
	ErrNotFile = errors.New("is not a regular file")
)

// Resolve returns the absolute path, free of symbolic links, of the regular file rel below root. An
// absolute rel, one with "..", and one whose symbolic links leave the root wrap ErrOutside. A root that
// cannot be looked into (a disk that is not mounted) is an error that wraps none of ours: it may heal.
//
// Call it right before reading: what a path means can change at any time.
func Resolve(root, rel string) (string, error) {
	if !filepath.IsLocal(rel) || rel != filepath.Clean(rel) {
		return "", fmt.Errorf("%s: %w %s", rel, ErrOutside, root)
	}
	r, err := os.OpenRoot(root)
	if err != nil {
		return "", fmt.Errorf("%s cannot be opened: %s", root, reason(err))
	}
	defer r.Close()
	checked, err := r.Stat(rel) // refuses to follow a link out of the root
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return "", fmt.Errorf("%s: %w", rel, ErrMissing)
	case err != nil && leaves(root, rel):
		return "", fmt.Errorf("%s: %w %s", rel, ErrOutside, root)
	case err != nil:
		return "", fmt.Errorf("%s: %s", rel, reason(err))
	case !checked.Mode().IsRegular():
		return "", fmt.Errorf("%s: %w", rel, ErrNotFile)
	}
	real, err := filepath.EvalSymlinks(filepath.Join(root, rel))
	if err != nil {
		return "", fmt.Errorf("%s: %s", rel, reason(err))
	}
	// The plain path could have been swapped since; it counts only if it is the file that was checked.
	if info, err := os.Lstat(real); err != nil || !os.SameFile(info, checked) {
		return "", fmt.Errorf("%s: %w %s", rel, ErrOutside, root)
	}
	return real, nil
}

// leaves tells a refused link apart from other failures (os.Root's own error for it is not exported).
func leaves(root, rel string) bool {
	root, err := filepath.EvalSymlinks(root)
	if err != nil {
		return false
	}
	real, err := filepath.EvalSymlinks(filepath.Join(root, rel))
	if err != nil {
		return false
	}
	below, err := filepath.Rel(root, real)
	return err == nil && !filepath.IsLocal(below) || absoluteLink(root, rel)
}

// absoluteLink reports whether a link on the way is absolute: os.Root refuses those wherever they lead.
func absoluteLink(root, rel string) bool {
	at := root
	for part := range strings.SplitSeq(rel, string(filepath.Separator)) {
		at = filepath.Join(at, part)
		if to, err := os.Readlink(at); err == nil && filepath.IsAbs(to) {
			return true
		}
	}
	return false
}

// reason is the bare system error: the caller has named the path in words of its own.
func reason(err error) error {
	if pathErr := (*fs.PathError)(nil); errors.As(err, &pathErr) {
		return pathErr.Err
	}
	return err
}
