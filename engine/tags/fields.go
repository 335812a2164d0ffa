package tags

import (
	"bytes"
	"slices"
	"strings"
)

// Add puts values behind those that a name has, which is compared in capitals and written so. Empty ones say nothing.
func (s *Sheet) Add(name string, values ...string) {
	name = strings.ToUpper(name)
	values = slices.DeleteFunc(slices.Clone(values), func(v string) bool { return v == "" })
	at := s.index(name)
	switch {
	case name == "" || len(values) == 0:
	case at < 0:
		s.Fields = append(s.Fields, Field{name, values})
	default:
		s.Fields[at].Values = append(s.Fields[at].Values, values...)
	}
}

// AddNumber adds a number that may have how many there are behind it, "3/12".
func (s *Sheet) AddNumber(name, total, value string) {
	n, of, both := strings.Cut(value, "/")
	if !both {
		s.Add(name, value)
		return
	}
	s.Add(name, strings.TrimSpace(n))
	if of = strings.TrimSpace(of); !slices.Contains(s.Values(total), of) {
		s.Add(total, of)
	}
}

// Values are what a name in capitals says, or none.
func (s *Sheet) Values(name string) []string {
	if at := s.index(name); at >= 0 {
		return s.Fields[at].Values
	}
	return nil
}

func (s *Sheet) index(name string) int {
	return slices.IndexFunc(s.Fields, func(f Field) bool { return f.Name == name })
}

// Merge takes what a sheet lacks from another: fields of other names, and pictures or chapters if there are none.
func (s *Sheet) Merge(other Sheet) {
	for _, f := range other.Fields {
		if s.index(f.Name) < 0 {
			s.Fields = append(s.Fields, f)
		}
	}
	if len(s.Pictures) == 0 {
		s.Pictures = other.Pictures
	}
	if len(s.Chapters) == 0 {
		s.Chapters = other.Chapters
	}
}

// Settle brings a sheet that was read into the order that its fields promise, and takes out what is not true of a
// levelled copy in another format: what Stale tells, and what encoded the sound.
func (s *Sheet) Settle() {
	s.Fields = slices.DeleteFunc(s.Fields, func(f Field) bool { return Stale(f.Name) || NamesEncoder(f.Name) })
	if at := slices.IndexFunc(s.Pictures, func(p Picture) bool { return p.Kind == FrontCover }); at > 0 {
		front := s.Pictures[at]
		s.Pictures = slices.Insert(slices.Delete(slices.Clone(s.Pictures), at, at+1), 0, front)
	}
	slices.SortStableFunc(s.Chapters, func(a, b Chapter) int { return int(min(max(a.Start-b.Start, -1), 1)) })
}

// NamesEncoder reports whether a tag of this name says what a file was encoded with.
func NamesEncoder(name string) bool {
	return slices.Contains([]string{"ENCODER", "ENCODER_OPTIONS", "ENCODER OPTIONS", "ENCODING PARAMS"}, strings.ToUpper(name))
}

// pictureMagics are what pictures begin with, and their kinds.
var pictureMagics = [][2]string{
	{"\xFF\xD8\xFF", "image/jpeg"}, {"\x89PNG\r\n\x1A\n", "image/png"}, {"GIF8", "image/gif"}, {"BM", "image/bmp"}, {"II*\x00", "image/tiff"}, {"MM\x00*", "image/tiff"},
}

// MIME says of what kind a picture is, by its first bytes; "" if they tell nothing.
func MIME(picture []byte) string {
	for _, m := range pictureMagics {
		if bytes.HasPrefix(picture, []byte(m[0])) {
			return m[1]
		}
	}
	if len(picture) >= 12 && string(picture[:4]) == "RIFF" && string(picture[8:12]) == "WEBP" {
		return "image/webp"
	}
	return ""
}
