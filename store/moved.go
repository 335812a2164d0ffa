package store

import (
	"path"
	"strings"
)

// movedFiles says where recordings have gone whose file is no longer under its path, by that path: to a file that nobody
// knew, of the same length, time and extension, that is the same inode, or has the same name and is the only one. What
// is ambiguous is left: once it is measured, its sound may tell (see Follow).
func movedFiles(known []knownFile, have map[string]bool, files []FoundFile, found map[string]FoundFile, unread []string) map[string]string {
	type looks struct {
		size, modified int64
		extension      string
		name           string // "" among those compared by inode
		inode          int64  // 0 among those compared by name
	}
	ends := func(p string) (name, extension string) { return path.Base(p), strings.ToLower(path.Ext(p)) }
	gone, fresh := map[looks][]string{}, map[looks][]string{}
	note := func(list map[looks][]string, p string, size, modified, inode int64) {
		name, extension := ends(p)
		l := looks{size: size, modified: modified, extension: extension}
		if inode != 0 {
			same := l
			same.inode = inode
			list[same] = append(list[same], p)
		}
		l.name = name
		list[l] = append(list[l], p)
	}
	for _, k := range known {
		if _, here := found[k.path]; !here && !underAny(unread, k.path) {
			note(gone, k.path, k.size, k.modified, k.inode)
		}
	}
	if len(gone) == 0 {
		return nil
	}
	seen := map[string]bool{}
	for _, f := range files {
		if !have[f.Path] && !seen[f.Path] {
			seen[f.Path] = true
			note(fresh, f.Path, found[f.Path].Size, found[f.Path].ModifiedAt.UnixMilli(), int64(found[f.Path].Inode))
		}
	}
	moved, taken := map[string]string{}, map[string]bool{}
	for _, byInode := range []bool{true, false} {
		for l, from := range gone {
			to := fresh[l]
			if (l.inode != 0) != byInode || len(from) != 1 || len(to) != 1 || moved[from[0]] != "" || taken[to[0]] {
				continue
			}
			moved[from[0]], taken[to[0]] = to[0], true
		}
	}
	return moved
}
