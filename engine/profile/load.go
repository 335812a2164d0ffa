package profile

import (
	"bytes"
	"cmp"
	"errors"
	"fmt"
	"io"
	"maps"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"slices"
	"strings"

	"github.com/pelletier/go-toml/v2"
)

// LargestFile is the most bytes a profile's file may have.
const LargestFile = 64 << 10

// mostComplaints is how many complaints about one file are worth reading.
const mostComplaints = 100

// basis is the field of a file that names the built-in profile it starts from.
const basis = "based_on"

// Load reads the profile in a TOML file, whose name without ".toml" is the profile's. The error is Complaints with
// all that is wrong; each names the file as path does.
func Load(path string) (Profile, error) {
	return load(path, path)
}

// load reads a file that complaints call shown.
func load(path, shown string) (Profile, error) {
	complain := func(words string) (Profile, error) {
		return Profile{}, Complaints{{File: shown, Words: words}}
	}
	if !isProfile(path) {
		return complain("a profile's file is called NAME.toml")
	}
	text, err := read(path)
	if err != nil {
		return complain(err.Error())
	}
	p, err := Parse(nameOf(path), text)
	var all Complaints
	if errors.As(err, &all) {
		for i := range all {
			all[i].File = shown
		}
	}
	return p, err
}

func isProfile(path string) bool {
	return strings.EqualFold(filepath.Ext(path), ".toml") && nameOf(path) != ""
}

func nameOf(path string) string {
	base := filepath.Base(path)
	return base[:len(base)-len(filepath.Ext(base))]
}

// read returns a file's bytes. Only a plain file is opened: a pipe would wait for ever.
func read(path string) ([]byte, error) {
	info, err := os.Stat(path)
	if err != nil {
		return nil, plain(err)
	}
	if !info.Mode().IsRegular() {
		return nil, errors.New("is not a file")
	}
	f, err := os.Open(path)
	if err != nil {
		return nil, plain(err)
	}
	defer f.Close()
	text, err := io.ReadAll(io.LimitReader(f, LargestFile+1)) // one more than Parse takes, so that it complains
	if err != nil {
		return nil, plain(err)
	}
	return text, nil
}

// plain takes the path off an error that is shown beside it.
func plain(err error) error {
	var at *os.PathError
	if errors.As(err, &at) {
		return at.Err
	}
	return err
}

// Parse reads a profile from TOML. It is called name, or with "" what the text says, if it does. What is not given is
// as in the profile it is based on, or else as usual. The error is Complaints with all that is wrong.
func Parse(name string, text []byte) (Profile, error) {
	if len(text) > LargestFile {
		return Profile{}, Complaints{{Words: fmt.Sprintf("is larger than %d KiB", LargestFile>>10)}}
	}
	text = bytes.TrimPrefix(text, []byte("\ufeff")) // some editors begin every file with it
	if c := refused(text); c.Words != "" {
		return Profile{}, Complaints{c}
	}
	var given map[string]any
	if err := toml.Unmarshal(text, &given); err != nil {
		c := Complaint{Words: "is not TOML: " + strings.TrimPrefix(err.Error(), "toml: ")}
		var at *toml.DecodeError
		if errors.As(err, &at) {
			c.Line, _ = at.Position()
		}
		return Profile{}, Complaints{c}
	}
	r := reader{given: map[string]any{}}
	r.flatten("", given)
	p := r.start()
	p.Name = cmp.Or(name, "unnamed")
	for _, f := range fields {
		r.take(&p, f)
	}
	if name != "" && p.Name != name {
		r.complain("name", "%q is not what the file is called, which is %q: leave it out", shortened(p.Name), name)
		p.Name = name
	}
	if _, err := Named(p.Name); err == nil {
		r.complain("name", "%s is a built-in profile: call this one something else", p.Name)
	}
	for _, c := range complaints(p.Validate()) {
		if !r.all.about(c.Field) {
			r.all = append(r.all, c)
		}
	}
	if len(r.all) == 0 {
		return p, nil
	}
	at := lines(text)
	for i := range r.all {
		r.all[i].Line = at[r.all[i].Field]
	}
	slices.SortStableFunc(r.all, func(a, b Complaint) int {
		return cmp.Compare(uint(a.Line)-1, uint(b.Line)-1) // what has no line goes last
	})
	return Profile{}, r.all
}

func complaints(err error) (all Complaints) {
	errors.As(err, &all)
	return all
}

// reader takes what a file gives into a profile and keeps the complaints.
type reader struct {
	given map[string]any // by the field's name with its table
	all   Complaints
}

func (r *reader) complain(field, format string, args ...any) {
	if len(r.all) < mostComplaints {
		r.all = append(r.all, Complaint{Field: field, Words: fmt.Sprintf(format, args...)})
	}
}

// flatten sorts the values by field. A name that no field has is a complaint.
func (r *reader) flatten(table string, values map[string]any) {
	for _, key := range slices.Sorted(maps.Keys(values)) {
		name, v := table+key, values[key]
		inner, isTable := v.(map[string]any)
		switch {
		case len(r.all) >= mostComplaints:
			return
		case table == "" && slices.ContainsFunc(tables, func(t Word) bool { return t.Word == key }):
			if !isTable {
				r.complain(name, "has to be a table: [%s]", key)
				continue
			}
			r.flatten(key+".", inner)
		case !strings.Contains(key, ".") && (places[name] != nil || name == basis):
			r.given[name] = v
		default:
			r.complain(shortened(name), "is not a field of a profile%s", meant(name))
		}
	}
}

// start is the profile that the file changes.
func (r *reader) start() Profile {
	on, given := r.given[basis]
	if !given {
		for _, f := range fields {
			if _, given := r.given[f.Name]; f.Needed && !given {
				r.complain(f.Name, "has to be given, or else based_on: %s", f.Allowed())
			}
		}
		speed, _ := r.given["ride.speed"].(string)
		if _, given := r.given["ride.range_lu"]; !given && speed != "" && speed != string(Still) {
			r.complain("ride.range_lu", "has to be given for a ride, or else based_on")
		}
		return usual
	}
	name, _ := on.(string)
	p, err := Named(name)
	if err != nil {
		r.complain(basis, "%s is not a built-in profile: %s", quoted(on), either(names(builtin)))
		p = usual
		p.Summary = "unknown"
		return p
	}
	p.Summary = fmt.Sprintf("Based on %s. %s", name, p.Summary)
	if r.given["ride.strength"] == string(Gentle) && name == "film" {
		soften(&p)
	}
	return p
}

// soften is what the gentle strength brings along for films: wider in every respect, and no compressor.
func soften(p *Profile) {
	p.Ride.Range, p.Ride.Deadband, p.Compressor.Ratio = 13, 2, 1
}

// take sets one field, if it is given and of the right kind.
func (r *reader) take(p *Profile, f Field) {
	v, given := r.given[f.Name]
	if !given {
		return
	}
	to := f.in(p)
	switch v := v.(type) {
	case string:
		if to.Kind() == reflect.String {
			to.SetString(v)
			return
		}
	case int64:
		switch to.Kind() {
		case reflect.Float64:
			to.SetFloat(float64(v))
			return
		case reflect.Int:
			to.SetInt(v)
			return
		}
	case float64:
		if to.Kind() == reflect.Float64 {
			// A profile is kept with four decimals; what is levelled with is what is kept.
			to.SetFloat(math.Round(v*1e4) / 1e4)
			return
		}
	}
	what := map[reflect.Kind]string{reflect.String: "text in quotes", reflect.Int: "a whole number", reflect.Float64: "a number"}[to.Kind()]
	r.complain(f.Name, "%s is not %s: %s", quoted(v), what, f.Allowed())
}

// quoted shows a value of a file in a complaint.
func quoted(v any) string {
	if s, ok := v.(string); ok {
		return fmt.Sprintf("%q", shortened(s))
	}
	switch reflect.ValueOf(v).Kind() {
	case reflect.Map:
		return "a table"
	case reflect.Slice:
		return "a list"
	}
	return shortened(fmt.Sprint(v))
}
