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

// otherNames are the extensions under which a format is known too.
var otherNames = map[string][]string{".wav": {".wave", ".bwf", ".rf64"}, ".aiff": {".aif", ".aifc"}}

// ExtensionFor returns the extension of a delivery made from the file at source: the source's own, if that is one of
// the format's.
func (s Spec) ExtensionFor(source string) string {
	if own := filepath.Ext(source); slices.Contains(otherNames[s.Extension], strings.ToLower(own)) {
		return own
	}
	return s.Extension
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
