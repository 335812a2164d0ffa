package id3

// Names of a Sheet's fields for ID3v2's frames, as taggers have agreed on them (from memory), used both ways: where a frame
// or a name comes twice, its first line is the one that is written.
var names = [][2]string{
	{"TIT2", "TITLE"}, {"TPE1", "ARTIST"}, {"TALB", "ALBUM"}, {"TPE2", "ALBUMARTIST"}, {"TRCK", "TRACKNUMBER"},
	{"TPOS", "DISCNUMBER"}, {"TDRC", "DATE"}, {"TCON", "GENRE"}, {"TCOM", "COMPOSER"}, {"COMM", "COMMENT"},
	{"USLT", "LYRICS"}, {"TSRC", "ISRC"}, {"TBPM", "BPM"}, {"TCOP", "COPYRIGHT"}, {"TLAN", "LANGUAGE"},
	{"TIT1", "GROUPING"}, {"GRP1", "GROUPING"}, {"TIT3", "SUBTITLE"}, {"TSST", "DISCSUBTITLE"},
	{"TPE3", "CONDUCTOR"}, {"TPE4", "REMIXER"}, {"TEXT", "LYRICIST"}, {"TPUB", "LABEL"}, {"TPUB", "PUBLISHER"}, {"TPUB", "ORGANIZATION"}, {"TENC", "ENCODEDBY"},
	{"TDOR", "ORIGINALDATE"}, {"TORY", "ORIGINALDATE"}, {"TOPE", "ORIGINALARTIST"}, {"TOAL", "ORIGINALALBUM"},
	{"TOLY", "ORIGINALLYRICIST"}, {"TOFN", "ORIGINALFILENAME"}, {"TDRL", "RELEASEDATE"}, {"TDEN", "ENCODINGTIME"},
	{"TDTG", "TAGGINGDATE"}, {"TKEY", "INITIALKEY"}, {"TKEY", "KEY"}, {"TMOO", "MOOD"}, {"TMED", "MEDIA"}, {"TCMP", "COMPILATION"},
	{"TSOA", "ALBUMSORT"}, {"TSOP", "ARTISTSORT"}, {"TSOT", "TITLESORT"}, {"TSO2", "ALBUMARTISTSORT"}, {"TSOC", "COMPOSERSORT"},
	{"TRSN", "RADIOSTATION"}, {"TRSO", "RADIOSTATIONOWNER"}, {"TOWN", "FILEOWNER"}, {"TPRO", "PRODUCEDNOTICE"},
	{"TDLY", "PLAYLISTDELAY"}, {"MVNM", "MOVEMENTNAME"}, {"MVIN", "MOVEMENT"},
	{"WCOM", "COMMERCIALURL"}, {"WCOP", "LICENSE"}, {"WOAF", "FILEURL"}, {"WOAR", "WEBSITE"}, {"WOAS", "SOURCEURL"},
	{"WORS", "RADIOSTATIONURL"}, {"WPAY", "PAYMENTURL"}, {"WPUB", "PUBLISHERURL"}, {"WFED", "PODCASTURL"}, {"WXXX", "URL"},
}

// onlyRead are frames that no standard knows, and the names that other carriers have for them, which are not always
// about the same.
var onlyRead = map[string]string{"TDES": "DESCRIPTION", "TKWD": "PODCASTKEYWORDS", "TCAT": "PODCASTCATEGORY", "TGID": "PODCASTID"}

// leftOut are text frames about the file and not the recording: its type, length, size and encoder.
var leftOut = []string{"TFLT", "TLEN", "TSIZ", "TSSE"}

// recordingID is the owner of the UFID frame that is a field of its own elsewhere.
const recordingID, recordingName = "http://musicbrainz.org", "MUSICBRAINZ_TRACKID"

// totals are the numbers that ID3v2 writes as "3/12", and what they are out of.
var totals = map[string]string{"TRACKNUMBER": "TRACKTOTAL", "DISCNUMBER": "DISCTOTAL", "MOVEMENT": "MOVEMENTTOTAL"}

// involved are the parts that people have in TIPL, and IPLS before.
var involved = [][2]string{
	{"arranger", "ARRANGER"}, {"engineer", "ENGINEER"}, {"producer", "PRODUCER"}, {"DJ-mix", "DJMIXER"}, {"mix", "MIXER"},
}

var nameOf, frameOf = bothWays(names)
var nameInvolved, involvedAs = bothWays(involved)

// bothWays returns the table as two maps.
func bothWays(table [][2]string) (there, back map[string]string) {
	there, back = map[string]string{}, map[string]string{}
	for _, pair := range table {
		if there[pair[0]] == "" {
			there[pair[0]] = pair[1]
		}
		if back[pair[1]] == "" {
			back[pair[1]] = pair[0]
		}
	}
	return there, back
}

// older are the names of ID3v2.2 for frames whose content is as in later versions (2.2.0, 4). PIC is not, and stays.
var older = map[string]string{
	"BUF": "RBUF", "CNT": "PCNT", "COM": "COMM", "ETC": "ETCO", "EQU": "EQUA", "GEO": "GEOB", "IPL": "IPLS", "MCI": "MCDI",
	"MLL": "MLLT", "POP": "POPM", "REV": "RVRB", "RVA": "RVAD", "SLT": "SYLT", "STC": "SYTC", "TAL": "TALB", "TBP": "TBPM",
	"TCM": "TCOM", "TCO": "TCON", "TCP": "TCMP", "TCR": "TCOP", "TDA": "TDAT", "TDY": "TDLY", "TEN": "TENC", "TFT": "TFLT",
	"TIM": "TIME", "TKE": "TKEY", "TLA": "TLAN", "TLE": "TLEN", "TMT": "TMED", "TOA": "TOPE", "TOF": "TOFN", "TOL": "TOLY",
	"TOR": "TORY", "TOT": "TOAL", "TP1": "TPE1", "TP2": "TPE2", "TP3": "TPE3", "TP4": "TPE4", "TPA": "TPOS", "TPB": "TPUB",
	"TRC": "TSRC", "TRD": "TRDA", "TRK": "TRCK", "TS2": "TSO2", "TSA": "TSOA", "TSC": "TSOC", "TSI": "TSIZ", "TSP": "TSOP",
	"TSS": "TSSE", "TST": "TSOT", "TT1": "TIT1", "TT2": "TIT2", "TT3": "TIT3", "TXT": "TEXT", "TXX": "TXXX", "TYE": "TYER",
	"UFI": "UFID", "ULT": "USLT", "WAF": "WOAF", "WAR": "WOAR", "WAS": "WOAS", "WCM": "WCOM", "WCP": "WCOP", "WPB": "WPUB",
	"WXX": "WXXX",
}
