package media

import (
	"path/filepath"
	"slices"
	"strings"
)

// extensions of files worth opening when a folder is scanned; the content decides what they are.
var extensions = []string{
	".aac", ".ac3", ".aif", ".aifc", ".aiff", ".amr", ".ape", ".asf", ".au", ".avi", ".bwf", ".caf", ".eac3",
	".flac", ".flv", ".m2ts", ".m4a", ".m4b", ".m4v", ".mka", ".mkv", ".mov", ".mp1", ".mp2", ".mp3", ".mp4",
	".mpeg", ".mpg", ".oga", ".ogg", ".ogv", ".opus", ".rf64", ".snd", ".ts", ".w64", ".wav", ".wave", ".webm",
	".wma", ".wmv", ".wv",
}

// Extensions returns the file extensions worth trying in a folder scan: lower case, with dot, sorted.
func Extensions() []string { return slices.Clone(extensions) }

// LooksLikeMedia reports whether a file of this name is worth opening. Hidden files (a leading dot) are
// not: that is where scratch files and other systems' resource forks live.
func LooksLikeMedia(name string) bool {
	base := filepath.Base(name)
	if strings.HasPrefix(base, ".") {
		return false
	}
	_, found := slices.BinarySearch(extensions, strings.ToLower(filepath.Ext(base)))
	return found
}

// twins are extensions of one format of sound, whose files keep the one they have.
var twins = [][]string{{".wav", ".wave", ".bwf", ".rf64"}, {".aiff", ".aif", ".aifc"}, {".m4a", ".m4b"}, {".ogg", ".oga"}}

// ExtensionFor is the extension of a delivery made from the file at source: the file's own where it is usual for the
// delivery's format too, as an audiobook's is, and in the case it has.
func (s Spec) ExtensionFor(source string) string {
	own := filepath.Ext(source)
	twin := func(list []string) bool {
		return slices.Contains(list, s.Extension) && slices.Contains(list, strings.ToLower(own))
	}
	film := s.Film != nil && slices.Contains(filmKinds[s.Container].extensions, strings.ToLower(own))
	if strings.EqualFold(own, s.Extension) || film || slices.ContainsFunc(twins, twin) {
		return own
	}
	return s.Extension
}
