package delivery

import (
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"regexp"
	"strings"
	"syscall"
	"time"

	"golang.org/x/sys/unix"
)

var (
	validKey = regexp.MustCompile(`^[a-z0-9-]{1,40}$`)
	scratch  = regexp.MustCompile(`^\..+\.evenshelf-[a-z0-9-]{1,40}\.part$`)
)

// longestBase keeps a scratch name within the 255 bytes a file name may have.
const longestBase = 180

// scratchName is hidden, says what it is for, and carries our mark, so that Sweep removes nobody else's.
func scratchName(base, key string) string {
	if len(base) > longestBase {
		sum := sha256.Sum256([]byte(base))
		base = base[:longestBase-9] + "-" + hex.EncodeToString(sum[:4])
	}
	return "." + base + ".evenshelf-" + key + ".part"
}

// Unchanged returns an error if the file at path is no longer what it was when info was taken. A recording
// that is still being copied onto its shelf gives readings of something that never was.
func Unchanged(path string, info fs.FileInfo) error {
	last, err := os.Stat(path)
	if err != nil {
		return fmt.Errorf("gone while it was being read: %w", err)
	}
	if !os.SameFile(last, info) || last.Size() != info.Size() || !last.ModTime().Equal(info.ModTime()) {
		return fmt.Errorf("%s was changed while it was being read", path)
	}
	return nil
}

// Sweep removes the scratch files below dir that a crash left behind and returns how many. No job may be
// delivering there. A folder that does not exist has none; it follows no links.
func Sweep(dir string) (removed int, err error) {
	var errs []error
	err = filepath.WalkDir(dir, func(p string, d fs.DirEntry, err error) error {
		switch {
		case errors.Is(err, fs.ErrNotExist):
			return nil
		case err != nil:
			errs = append(errs, err)
		case d.Type().IsRegular() && scratch.MatchString(d.Name()):
			if err := os.Remove(p); err != nil {
				errs = append(errs, err)
			} else {
				removed++
			}
		}
		return nil
	})
	return removed, errors.Join(append(errs, err)...)
}

// makeFolder makes a folder below the output folder and syncs those it had to make into their parents. A
// link on the way that leads out of the output folder is a refusal.
func (d *delivery) makeFolder(name string) (refusal string, err error) {
	if info, err := d.root.Stat(name); err == nil && info.IsDir() {
		return "", nil
	}
	if err := d.root.MkdirAll(name, 0o755); err != nil {
		if d.leaves(name) {
			return fmt.Sprintf("a symbolic link in %s leads out of the copies folder", name), nil
		}
		return noWay(fmt.Errorf("make the folder for the copy: %w", err))
	}
	for at := name; at != "."; at = path.Dir(at) {
		if err := d.syncFolder(path.Dir(at)); err != nil {
			return "", err
		}
	}
	return "", nil
}

// leaves explains why os.Root refused a folder; its own error for that is not exported.
func (d *delivery) leaves(name string) bool {
	top, err := filepath.EvalSymlinks(d.root.Name())
	if err != nil {
		return false
	}
	for at := name; at != "."; at = path.Dir(at) {
		if real, err := filepath.EvalSymlinks(filepath.Join(top, at)); err == nil {
			below, err := filepath.Rel(top, real)
			return err != nil || !filepath.IsLocal(below)
		}
	}
	return false
}

// syncFolder makes the names in a folder below the output folder last through a power cut, like its namesake.
func (d *delivery) syncFolder(name string) error {
	f, err := d.root.Open(name)
	if err != nil {
		return err
	}
	return errors.Join(f.Sync(), f.Close())
}

// makeFolders makes a folder anywhere and syncs those it had to make into their parents.
func makeFolders(name string) error {
	if info, err := os.Stat(name); err == nil && info.IsDir() {
		return nil
	}
	parent := filepath.Dir(name)
	if parent != name {
		if err := makeFolders(parent); err != nil {
			return err
		}
	}
	if err := os.Mkdir(name, 0o755); err != nil && !errors.Is(err, fs.ErrExist) {
		return err
	}
	return syncFolder(parent)
}

// syncFolder makes the names in a folder last through a power cut.
func syncFolder(name string) error {
	f, err := os.Open(name)
	if err != nil {
		return err
	}
	return errors.Join(f.Sync(), f.Close())
}

// dress makes the scratch file look like another to whoever keeps files, once it is one.
func (d *delivery) dress(like string, info fs.FileInfo) error {
	made, err := d.root.Lstat(d.scratch)
	if err != nil {
		return fmt.Errorf("the engine left no file: %w", err)
	}
	if !made.Mode().IsRegular() || made.Size() == 0 {
		return fmt.Errorf("the engine left no sound in %s", d.scratch)
	}
	f, err := d.root.Open(d.scratch)
	if err != nil {
		return err
	}
	if err := errors.Join(dress(f, like, info), f.Close()); err != nil {
		return err
	}
	return d.root.Chtimes(d.scratch, time.Time{}, info.ModTime())
}

// dress gives a file the owner, mode and extended attributes of another, so that whoever could use that one can use
// this one. Its time is for the caller to set at the very end. Only root may give files away; others can do as much as a
// group they are in. A file system that has no room for an attribute keeps none.
func dress(f *os.File, like string, info fs.FileInfo) error {
	if owner, ok := info.Sys().(*syscall.Stat_t); ok && f.Chown(int(owner.Uid), int(owner.Gid)) != nil {
		_ = f.Chown(-1, int(owner.Gid))
	}
	if err := f.Chmod(info.Mode().Perm()); err != nil {
		return err
	}
	for _, name := range attributes(like) {
		if value, err := attribute(like, name); err == nil {
			_ = unix.Fsetxattr(int(f.Fd()), name, value, 0)
		}
	}
	return nil
}

// accessList is the attribute in which Linux keeps a file's POSIX access control list.
const accessList = "system.posix_acl_access"

// attributes are the names of what people and programs have noted beside a file (user.*), and its access control
// list. What the system keeps for itself, such as security labels, is not ours to hand on.
func attributes(path string) (names []string) {
	list := make([]byte, 64<<10) // the most that Linux gives
	n, err := unix.Llistxattr(path, list)
	if err != nil {
		return nil
	}
	for name := range strings.SplitSeq(string(list[:n]), "\x00") {
		if strings.HasPrefix(name, "user.") || name == accessList {
			names = append(names, name)
		}
	}
	return names
}

func attribute(path, name string) ([]byte, error) {
	value := make([]byte, 64<<10) // likewise
	n, err := unix.Lgetxattr(path, name, value)
	if err != nil {
		return nil, err
	}
	return value[:n], nil
}

// spare is what a copy may need beyond the size of its source before we would rather not begin.
const spare = 16 << 20 // bytes

// enoughSpace is a kindness, not a guarantee: a copy in another format may need more than its source.
func enoughSpace(dir string, size int64) error {
	var st unix.Statfs_t
	if err := unix.Statfs(dir, &st); err != nil {
		return fmt.Errorf("%s: free space: %w", dir, err)
	}
	if free := int64(st.Bavail) * int64(st.Bsize); free < size+spare {
		return fmt.Errorf("%s has %d MB free, the copy needs about %d MB", dir, free>>20, (size+spare)>>20)
	}
	return nil
}
