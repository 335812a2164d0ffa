package api

import (
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"

	"evenshelf/store"
)

// newShelf is a client's wish to register a folder.
type newShelf struct {
	Name   string `json:"name"`
	Root   string `json:"root"`
	Copies string `json:"copies"` // "" = a folder of the shelf's name in CopiesDir
}

// placed turns the wish into a shelf whose folders the operator has opened to clients. Whether the folders
// exist, and keep out of each other's way, is for the store to judge, which also hears from the command line.
func (a *API) placed(asked newShelf) (store.Shelf, error) {
	shelf := store.Shelf{Name: asked.Name, Root: asked.Root, Copies: asked.Copies}
	var errs []complaint
	if a.ShelfRoots != nil {
		if err := permitted(asked.Root, a.ShelfRoots); err != nil {
			errs = append(errs, complaint{"root", err.Error()})
		}
	}
	switch {
	case asked.Copies == "" && a.CopiesDir == "":
		errs = append(errs, complaint{"copies", "has to be given: no common folder for copies is set"})
	case asked.Copies == "":
		shelf.Copies = filepath.Join(a.CopiesDir, asked.Name)
	case a.ShelfRoots != nil:
		if err := permitted(asked.Copies, append([]string{a.CopiesDir}, a.ShelfRoots...)); err != nil {
			errs = append(errs, complaint{"copies", err.Error()})
		}
	}
	if len(errs) > 0 {
		return store.Shelf{}, invalid(errs...)
	}
	return shelf, nil
}

// permitted reports whether a path lies in one of the folders, both as it is written and where its symbolic
// links lead. Both answers read alike, so that nothing is told about what exists elsewhere.
func permitted(path string, folders []string) error {
	refused := fmt.Errorf("%q is not in a folder that is open to shelves", path)
	if !filepath.IsAbs(path) || strings.ContainsRune(path, 0) {
		return refused
	}
	leads, err := resolve(path)
	if err != nil {
		return refused
	}
	for _, folder := range folders {
		if folder == "" {
			continue
		}
		real, err := resolve(folder)
		if err == nil && (within(folder, path) || within(real, path)) && within(real, leads) {
			return nil
		}
	}
	return refused
}

// within reports whether path is the folder or below it; both are absolute.
func within(folder, path string) bool {
	rel, err := filepath.Rel(folder, path)
	return err == nil && filepath.IsLocal(rel)
}

// resolve follows symbolic links in the part of a path that exists and keeps the rest as it is. A link to
// nowhere is an error: it may lead anywhere tomorrow.
func resolve(path string) (string, error) {
	real, err := filepath.EvalSymlinks(path)
	if !errors.Is(err, fs.ErrNotExist) {
		return real, err
	}
	if _, lerr := os.Lstat(path); lerr == nil {
		return "", err
	}
	path = filepath.Clean(path)
	parent, err := resolve(filepath.Dir(path))
	if err != nil {
		return "", err
	}
	return filepath.Join(parent, filepath.Base(path)), nil
}
