package profile

import (
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
)

// Source is where a profile comes from.
type Source string

// The sources.
const (
	BuiltIn Source = "built-in"
	Own     Source = "own" // a file of the people who run Evenshelf
)

// Listed is a profile with where it comes from.
type Listed struct {
	Profile
	Source Source
	File   string // its name in the folder; "" if it is built-in
}

// Set is the profiles there are to choose from: the built-in ones and those of a folder.
type Set struct {
	All      []Listed   // ordered by name
	Problems Complaints // files of the folder that are not among them, and why
}

// Gather returns the built-in profiles together with those of a folder, which it reads anew; "" is no folder.
func Gather(dir string) Set {
	var s Set
	for _, p := range builtin {
		s.All = append(s.All, Listed{Profile: p, Source: BuiltIn})
	}
	if dir != "" {
		var own []Listed
		own, s.Problems = readFolder(dir)
		s.All = append(s.All, own...)
	}
	slices.SortFunc(s.All, byName)
	return s
}

func byName(a, b Listed) int { return strings.Compare(a.Name, b.Name) }

// LoadFolder reads every .toml file of a folder, without going into its sub-folders, and returns the profiles
// ordered by name. A file that is not as it should be does not hide the others: it is among the complaints, which
// name it without the folder.
func LoadFolder(dir string) ([]Profile, Complaints) {
	own, problems := readFolder(dir)
	all := make([]Profile, len(own))
	for i, o := range own {
		all[i] = o.Profile
	}
	return all, problems
}

func readFolder(dir string) (own []Listed, problems Complaints) {
	entries, err := os.ReadDir(dir)
	if err != nil {
		problems = Complaints{{File: dir, Words: "the folder cannot be read: " + plain(err).Error()}}
	}
	holders := map[string][]string{} // files by the name they claim
	for _, e := range entries {
		if isProfile(e.Name()) && !strings.HasPrefix(e.Name(), ".") { // an editor's scratch file is hidden
			holders[nameOf(e.Name())] = append(holders[nameOf(e.Name())], e.Name())
		}
	}
	for _, e := range entries {
		file := e.Name()
		switch same := holders[nameOf(file)]; {
		case !slices.Contains(same, file):
		case len(same) > 1: // which of them is meant is not ours to guess
			problems = append(problems, Complaint{File: file, Field: "name", Words: fmt.Sprintf("%s would all be called %s", strings.Join(same, ", "), nameOf(file))})
		default:
			p, err := load(filepath.Join(dir, file), file)
			if err != nil {
				problems = append(problems, complaints(err)...)
				continue
			}
			own = append(own, Listed{Profile: p, Source: Own, File: file})
		}
	}
	slices.SortFunc(own, byName)
	return own, problems
}

// Named returns the profile of that name. The error says what is wrong with the file of that name, if there is one,
// and wraps ErrUnknown if there is none.
func (s Set) Named(name string) (Listed, error) {
	var why Complaints
	for _, l := range s.All {
		if l.Name == name {
			return l, nil
		}
	}
	for _, c := range s.Problems {
		if isProfile(c.File) && nameOf(c.File) == name {
			why = append(why, c)
		}
	}
	if why != nil {
		return Listed{}, why
	}
	all := make([]Profile, len(s.All))
	for i, l := range s.All {
		all[i] = l.Profile
	}
	return Listed{}, fmt.Errorf("%w: %q; there are %s", ErrUnknown, shortened(name), strings.Join(names(all), ", "))
}

// Find returns the profile of that name, or the one in a file if it is a path that ends in .toml. It is for people
// who may read files here, not for requests from elsewhere.
func (s Set) Find(nameOrFile string) (Listed, error) {
	if !isProfile(nameOrFile) {
		return s.Named(nameOrFile)
	}
	p, err := Load(nameOrFile)
	if err != nil {
		return Listed{}, err
	}
	return Listed{Profile: p, Source: Own, File: filepath.Base(nameOrFile)}, nil
}

func names(all []Profile) []string {
	list := make([]string, len(all))
	for i, p := range all {
		list[i] = p.Name
	}
	return list
}

// Described is a profile as programs are told of it.
type Described struct {
	Profile
	Version string    `json:"version"`
	Source  Source    `json:"source"`
	Words   []Section `json:"words"`
}

// Described returns the profile with its version, its source and what it does in words.
func (l Listed) Described() Described { return Described{l.Profile, l.Version(), l.Source, l.Words()} }
