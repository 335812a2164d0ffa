package profile

import (
	"fmt"
	"reflect"
	"slices"
	"strconv"
	"strings"

	"evenshelf/engine/audio"
)

// Field is what is known about one field of a profile: validation, the files and the explanations all go by it.
type Field struct {
	Name  string // as a file has it, with its table: "ride.lift_db"
	Means string // a sentence for a person
	Unit  string // of a number: "dB", "LU", "ms", …; "" has none
	// Low and High bound a number.
	Low, High float64
	// Words are all a word can be; nil for other fields.
	Words []Word
	// Numbers are all a whole number can be; nil for other fields.
	Numbers []int
	// Needed says that a profile that is based on no other has to give it.
	Needed bool
}

// Word is one thing a field can say.
type Word struct {
	Word  string `json:"word"`
	Means string `json:"means"`
}

// Fields returns all fields, in the order of a file.
func Fields() []Field { return slices.Clone(fields) }

// FieldNamed returns the field of that name. The error says which may have been meant.
func FieldNamed(name string) (Field, error) {
	for _, f := range fields {
		if f.Name == name {
			return f, nil
		}
	}
	return Field{}, fmt.Errorf("%q is not a field of a profile%s", shortened(name), meant(name))
}

// places is where each field lies in a Profile, by its name.
var places = map[string][]int{}

func init() {
	var walk func(t reflect.Type, table string, at []int)
	walk = func(t reflect.Type, table string, at []int) {
		for i := range t.NumField() {
			name, here := table+t.Field(i).Tag.Get("toml"), append(slices.Clip(at), i)
			if t.Field(i).Type.Kind() == reflect.Struct {
				walk(t.Field(i).Type, name+".", here)
				continue
			}
			places[name] = here
		}
	}
	walk(reflect.TypeFor[Profile](), "", nil)
}

// in is the field's place in a profile.
func (f Field) in(p *Profile) reflect.Value {
	return reflect.ValueOf(p).Elem().FieldByIndex(places[f.Name])
}

// kind is reflect.String, reflect.Int or reflect.Float64.
func (f Field) kind() reflect.Kind { return f.in(&Profile{}).Kind() }

// table is the table the field is in, "" for the top.
func (f Field) table() string {
	table, _, inOne := strings.Cut(f.Name, ".")
	if !inOne {
		return ""
	}
	return table
}

// Value is what a profile says, for a person: "−18 LUFS", "slow".
func (f Field) Value(p Profile) string {
	switch v := f.in(&p); v.Kind() {
	case reflect.Float64:
		return withUnit(v.Float(), f.Unit)
	case reflect.Int:
		return withUnit(float64(v.Int()), f.Unit)
	default:
		return v.String()
	}
}

// Usual is what a profile says that is based on no other and does not give the field; "" if it has to.
func (f Field) Usual() string {
	if f.Needed {
		return ""
	}
	return f.Value(usual)
}

// Allowed says what the field can be: "-40 to -8 LUFS", "none, slow, medium or fast". Its figures are written as one
// types them.
func (f Field) Allowed() string {
	switch {
	case f.Words != nil:
		return either(f.words())
	case f.Numbers != nil:
		return either(f.numbers())
	case f.kind() == reflect.Float64:
		return strings.TrimSpace(fmt.Sprintf("%g to %g %s", f.Low, f.High, f.Unit))
	case f.Name == "name":
		return "1 to 40 of a-z, 0-9 and -"
	default:
		return fmt.Sprintf("one line of up to %d characters", longestSummary)
	}
}

// wrong says what is wrong with a profile's value, "" if nothing is.
func (f Field) wrong(p *Profile) string {
	v := f.in(p)
	switch {
	case f.Words != nil && !slices.Contains(f.words(), v.String()):
		return fmt.Sprintf("%q is not one of %s", shortened(v.String()), strings.Join(f.words(), ", "))
	case f.Numbers != nil && !slices.Contains(f.Numbers, int(v.Int())):
		return fmt.Sprintf("%d is not one of %s", v.Int(), strings.Join(f.numbers(), ", "))
	case v.Kind() == reflect.Float64 && !(v.Float() >= f.Low && v.Float() <= f.High):
		return fmt.Sprintf("%g is not between %g and %g", v.Float(), f.Low, f.High)
	case f.Name == "name" && !validName.MatchString(v.String()):
		return fmt.Sprintf("%q is not %s", shortened(v.String()), f.Allowed())
	case f.Name == "summary":
		return wrongSummary(v.String())
	}
	return ""
}

func (f Field) words() []string {
	all := make([]string, len(f.Words))
	for i, w := range f.Words {
		all[i] = w.Word
	}
	return all
}

func (f Field) numbers() []string {
	all := make([]string, len(f.Numbers))
	for i, n := range f.Numbers {
		all[i] = strconv.Itoa(n)
	}
	return all
}

// number writes a figure with as many decimals as it needs and a true minus sign.
func number(v float64) string {
	s := strings.TrimPrefix(strconv.FormatFloat(v, 'f', -1, 64), "-")
	_, decimals, _ := strings.Cut(s, ".")
	return audio.Number(v, len(decimals))
}

func withUnit(v float64, unit string) string { return strings.TrimSpace(number(v) + " " + unit) }

// either joins words: "a, b or c".
func either(words []string) string {
	last := len(words) - 1
	if last < 1 {
		return strings.Join(words, "")
	}
	return strings.Join(words[:last], ", ") + " or " + words[last]
}

// shortened keeps what a complaint quotes to a length that can be read.
func shortened(s string) string {
	const most = 60
	if r := []rune(s); len(r) > most {
		return string(r[:most]) + "…"
	}
	return s
}

// meant says which fields a name that is none may have been meant for: "; did you mean ride.lift_db?".
func meant(name string) string {
	if len(name) > 40 {
		return ""
	}
	last := func(s string) string { return s[strings.LastIndex(s, ".")+1:] }
	var close []string
	for _, f := range fields {
		if last(f.Name) == last(name) || strings.HasPrefix(last(f.Name), last(name)+"_") || apart(f.Name, name) <= 2 {
			close = append(close, f.Name)
		}
	}
	if close == nil {
		return ""
	}
	return "; did you mean " + either(close) + "?"
}

// apart is how many letters have to be changed, added or taken out to make a into b (Levenshtein 1966).
func apart(a, b string) int {
	row := make([]int, len(b)+1)
	for j := range row {
		row[j] = j
	}
	for i := range len(a) {
		corner := row[0]
		row[0] = i + 1
		for j := range len(b) {
			change := corner
			if a[i] != b[j] {
				change++
			}
			corner = row[j+1]
			row[j+1] = min(change, row[j]+1, row[j+1]+1)
		}
	}
	return row[len(b)]
}
