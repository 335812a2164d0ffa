package vorbis

import (
	"fmt"
	"slices"
	"strconv"
	"strings"
	"time"

	"evenshelf/engine/tags"
)

// cut returns the name of an entry in capitals and its value; an entry without a name has "".
func cut(entry string) (name, value string) {
	name, value, named := strings.Cut(entry, "=")
	if !named {
		return "", entry
	}
	return strings.ToUpper(name), value
}

// other names that taggers give to what a Sheet has one name for.
var others = map[string]string{
	"TOTALTRACKS": "TRACKTOTAL", "TOTALDISCS": "DISCTOTAL", "UNSYNCEDLYRICS": "LYRICS", "ALBUM ARTIST": "ALBUMARTIST", "ALBUM_ARTIST": "ALBUMARTIST",
}

// Sheet is what comments say. Entries without a name, and the channel mask, are none of it.
func (c Comment) Sheet() (s tags.Sheet) {
	s.Pictures = c.TakePictures()
	chapters := chaptersOf(c.Entries)
	for _, entry := range c.Entries {
		name, value := cut(entry)
		if other, ok := others[name]; ok {
			name = other
		}
		number, _, isChapter := chapterName(name)
		_, read := chapters[number]
		switch {
		case isChapter && read || name == Mask:
		case name == "TRACKNUMBER":
			s.AddNumber(name, "TRACKTOTAL", value)
		case name == "DISCNUMBER":
			s.AddNumber(name, "DISCTOTAL", value)
		case name == "TRACKTOTAL" || name == "DISCTOTAL":
			if !slices.Contains(s.Values(name), value) { // it may have stood behind the number
				s.Add(name, value)
			}
		default:
			s.Add(name, value)
		}
	}
	for _, ch := range chapters {
		s.Chapters = append(s.Chapters, ch)
	}
	slices.SortFunc(s.Chapters, func(a, b tags.Chapter) int {
		if a.Start != b.Start {
			return int(min(max(a.Start-b.Start, -1), 1))
		}
		return strings.Compare(a.Title, b.Title) // so that the order is always the same
	})
	return s
}

// Mask is the comment that names loudspeakers where they are not the usual ones (RFC 9639, 8.6.2).
const Mask = "WAVEFORMATEXTENSIBLE_CHANNEL_MASK"

// chaptersOf reads the chapters in comments, by the name that their comments begin with. Of two that have one name the
// first counts.
func chaptersOf(entries []string) map[string]tags.Chapter {
	list := map[string]tags.Chapter{}
	for _, entry := range entries {
		name, value := cut(entry)
		number, of, ok := chapterName(name)
		if _, known := list[number]; ok && of == "" && !known {
			if start, ok := parseTime(value); ok {
				list[number] = tags.Chapter{Start: start}
			}
		}
	}
	for _, entry := range entries {
		name, value := cut(entry)
		number, of, ok := chapterName(name)
		if ch, known := list[number]; ok && of == "NAME" && known && ch.Title == "" {
			ch.Title = value
			list[number] = ch
		}
	}
	return list
}

// chapterName takes the name of a chapter's comment apart: "CHAPTER001", its time, or what follows that: "NAME", "URL".
func chapterName(name string) (number, of string, ok bool) {
	digits, ok := strings.CutPrefix(name, "CHAPTER")
	end := strings.IndexFunc(digits+"x", func(r rune) bool { return r < '0' || r > '9' })
	of = digits[end:]
	return digits[:end], of, ok && end >= 2 && end <= 9 && (of == "" || of == "NAME" || of == "URL")
}

const longest = 1 << 20 // hours: keeps a time within its type

// parseTime reads "00:01:02.345".
func parseTime(s string) (time.Duration, bool) {
	part := strings.Split(strings.TrimSpace(s), ":")
	if len(part) != 3 {
		return 0, false
	}
	hours, err1 := strconv.ParseUint(part[0], 10, 32)
	minutes, err2 := strconv.ParseUint(part[1], 10, 8)
	whole, fraction, _ := strings.Cut(part[2], ".")
	seconds, err3 := strconv.ParseUint(whole, 10, 8)
	nanos, err4 := strconv.ParseUint((fraction + "000000000")[:9], 10, 32)
	if err1 != nil || err2 != nil || err3 != nil || err4 != nil || hours > longest || minutes > 59 || seconds > 59 {
		return 0, false
	}
	return time.Duration(hours)*time.Hour + time.Duration(minutes)*time.Minute + time.Duration(seconds)*time.Second + time.Duration(nanos), true
}

// formatTime writes a time to the millisecond: of more digits players make hours.
func formatTime(d time.Duration) string {
	ms := d.Round(time.Millisecond).Milliseconds()
	return fmt.Sprintf("%02d:%02d:%02d.%03d", ms/3_600_000, ms/60_000%60, ms/1000%60, ms%1000)
}

// FromSheet makes comments of all in a sheet but its pictures (see PutPictures).
func FromSheet(s tags.Sheet) Comment {
	c := Comment{Vendor: Vendor}
	for _, f := range s.Fields {
		name := legal(f.Name)
		if _, _, chapter := chapterName(name); name != f.Name && (chapter || name == pictureName) {
			name = "_" + name // or it would come to mean something else
		}
		for _, value := range f.Values {
			c.Entries = append(c.Entries, name+"="+value)
		}
	}
	for i, ch := range s.Chapters {
		name := fmt.Sprintf("CHAPTER%03d", i+1)
		c.Entries = append(c.Entries, name+"="+formatTime(ch.Start))
		if ch.Title != "" {
			c.Entries = append(c.Entries, name+"NAME="+ch.Title)
		}
	}
	return c
}

// legal makes a name of those characters that names of comments may have (Vorbis I, 5.2.1).
func legal(name string) string {
	return strings.Map(func(r rune) rune {
		if r < ' ' || r > '}' || r == '=' {
			return '_'
		}
		return r
	}, name)
}

// Fit takes out comments that leave no room for those in front of them in a block of so many bytes.
func (c *Comment) Fit(room int) {
	room -= 8 + len(c.Vendor) + len(c.Rest)
	c.Entries = slices.DeleteFunc(c.Entries, func(entry string) bool {
		if n := 4 + len(entry); n <= room {
			room -= n
			return false
		}
		return true
	})
}
