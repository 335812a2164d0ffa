package mp4

// texts are the items that hold text, and what a Sheet calls them. Sources: Apple's list of metadata keys of this form and
// what taggers have made of it; from memory.
var texts = [][2]string{
	{"\xA9nam", "TITLE"}, {"\xA9ART", "ARTIST"}, {"aART", "ALBUMARTIST"}, {"\xA9alb", "ALBUM"}, {"\xA9day", "DATE"},
	{"\xA9gen", "GENRE"}, {"\xA9wrt", "COMPOSER"}, {"\xA9cmt", "COMMENT"}, {"\xA9lyr", "LYRICS"}, {"cprt", "COPYRIGHT"},
	{"\xA9grp", "GROUPING"}, {"desc", "DESCRIPTION"}, {"ldes", "LONGDESCRIPTION"}, {"\xA9wrk", "WORK"}, {"\xA9mvn", "MOVEMENTNAME"},
	{"sonm", "TITLESORT"}, {"soar", "ARTISTSORT"}, {"soaa", "ALBUMARTISTSORT"}, {"soal", "ALBUMSORT"}, {"soco", "COMPOSERSORT"},
	{"catg", "PODCASTCATEGORY"}, {"keyw", "PODCASTKEYWORDS"}, {"egid", "PODCASTID"}, {"purl", "PODCASTURL"},
}

// numbers are the items that hold a whole number, and how many bytes they have.
var numbers = []struct {
	kind, name string
	bytes      int
}{
	{"tmpo", "BPM", 2}, {"cpil", "COMPILATION", 1}, {"\xA9mvi", "MOVEMENT", 2}, {"\xA9mvc", "MOVEMENTTOTAL", 2},
}

// pairs are the items that hold a number and how many there are, in so many bytes.
var pairs = []struct {
	kind, name, total string
	bytes             int
}{
	{"trkn", "TRACKNUMBER", "TRACKTOTAL", 8}, {"disk", "DISCNUMBER", "DISCTOTAL", 6},
}

// Types of data in an item.
const (
	implicit   = 0
	utf8Text   = 1
	utf16Text  = 2
	gifImage   = 12
	jpegImage  = 13
	pngImage   = 14
	signed     = 21
	bmpImage   = 27
	dataHead   = 8 // bytes of type and country in front of the data
	genreItem  = "gnre"
	coverItem  = "covr"
	chapterBox = "chpl"
)

// images are the types of pictures that covers have, for their MIME types.
var images = map[string]uint32{"image/gif": gifImage, "image/jpeg": jpegImage, "image/png": pngImage, "image/bmp": bmpImage}
