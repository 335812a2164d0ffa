package delivery

import (
	"path"
	"slices"
	"strings"

	"evenshelf/engine/profile"
)

// extensions are those of files that a format can take the place of.
var extensions = map[profile.Format][]string{
	profile.WAV: {".wav", ".wave", ".bwf", ".rf64"}, profile.FLAC: {".flac"}, profile.MP3: {".mp3"},
	profile.M4A: {".m4a", ".m4b"}, profile.Vorbis: {".ogg", ".oga"}, profile.Opus: {".opus"},
}

// others are extensions of sound in formats that no profile names. Those of films are not here: a film stays one,
// whatever format is asked for.
var others = []string{".aac", ".ac3", ".aif", ".aifc", ".aiff", ".amr", ".ape", ".au", ".caf", ".eac3", ".mp1", ".mp2", ".snd", ".w64", ".wma", ".wv"}

// Unfit is why a file in a format cannot take a recording's place, as far as that can be told by its name; "" if it can,
// or if only its content will tell.
func Unfit(f profile.Format, rel string) string {
	own := strings.ToLower(path.Ext(rel))
	list, ok := extensions[f]
	if !ok || slices.Contains(list, own) {
		return ""
	}
	sound := slices.Contains(others, own)
	for _, list := range extensions {
		sound = sound || slices.Contains(list, own)
	}
	if !sound {
		return ""
	}
	return notInPlace(rel, list[0])
}
