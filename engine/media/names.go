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

// twins are extensions of one format, whose files keep the one they have. A film's is not among them: what is made of
// its sound must not take its place.
var twins = [][]string{{".m4a", ".m4b"}, {".aiff", ".aif"}, {".ogg", ".oga"}, {".wav", ".wave", ".bwf"}}

// ExtensionFor is the extension of a delivery made from a file of this name: the file's own where it is usual for the
// delivery's format too, as an audiobook's is.
func (s Spec) ExtensionFor(source string) string {
	own := filepath.Ext(source)
	for _, list := range twins {
		if slices.Contains(list, s.Extension) && slices.Contains(list, strings.ToLower(own)) {
			return own
		}
	}
	return s.Extension
}
