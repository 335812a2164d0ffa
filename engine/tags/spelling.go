package tags

import "strings"

// spellings are names that taggers write differently where names are in words (ID3v2's TXXX, MP4's freeform items, ASF)
// and in Vorbis comments.
var spellings = [][2]string{ // in comments, in words
	{"MUSICBRAINZ_TRACKID", "MusicBrainz Track Id"}, {"MUSICBRAINZ_RELEASETRACKID", "MusicBrainz Release Track Id"},
	{"MUSICBRAINZ_ALBUMID", "MusicBrainz Album Id"}, {"MUSICBRAINZ_ARTISTID", "MusicBrainz Artist Id"},
	{"MUSICBRAINZ_ALBUMARTISTID", "MusicBrainz Album Artist Id"}, {"MUSICBRAINZ_RELEASEGROUPID", "MusicBrainz Release Group Id"},
	{"MUSICBRAINZ_WORKID", "MusicBrainz Work Id"}, {"MUSICBRAINZ_DISCID", "MusicBrainz Disc Id"},
	{"RELEASESTATUS", "MusicBrainz Album Status"}, {"RELEASETYPE", "MusicBrainz Album Type"},
	{"RELEASECOUNTRY", "MusicBrainz Album Release Country"}, {"ACOUSTID_ID", "Acoustid Id"}, {"ACOUSTID_FINGERPRINT", "Acoustid Fingerprint"},
}

// InWords is how a name of a Sheet is written where names are in words.
func InWords(name string) string {
	for _, s := range spellings {
		if name == s[0] {
			return s[1]
		}
	}
	return name
}

// FromWords is the name that a Sheet has for one in words.
func FromWords(name string) string {
	for _, s := range spellings {
		if strings.EqualFold(name, s[1]) {
			return s[0]
		}
	}
	return strings.ToUpper(name)
}
