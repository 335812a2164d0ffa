package command

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"sync"

	"evenshelf/engine/profile"
)

// ownProfiles is the folder with profiles of people's own; "" if there is none.
func (a *app) ownProfiles() string {
	if a.ProfileDir != "" {
		return a.ProfileDir
	}
	dir := filepath.Join(a.Data, "profiles")
	if info, err := os.Stat(dir); err != nil || !info.IsDir() {
		return ""
	}
	return dir
}

// profiles are all there are to choose from. A file that is not as it should be is among the set's problems; it is
// an error if the folder that was asked for is not there.
func (a *app) profiles() (profile.Set, error) {
	dir := a.ownProfiles()
	if info, err := os.Stat(dir); dir != "" && (err != nil || !info.IsDir()) {
		return profile.Set{}, usageError(fmt.Sprintf("--profiles: %s is not a folder", dir))
	}
	return profile.Gather(dir), nil
}

// profile returns the profile that a command line names, or that is in the file it names.
func (a *app) profile(nameOrFile string) (profile.Profile, error) {
	l, err := a.listed(nameOrFile)
	return l.Profile, err
}

func (a *app) listed(nameOrFile string) (profile.Listed, error) {
	set, err := a.profiles()
	if err != nil {
		return profile.Listed{}, err
	}
	l, err := set.Find(nameOrFile)
	switch {
	case errors.Is(err, profile.ErrUnknown):
		return l, usageError(err.Error() + "; see 'evenshelf profiles'")
	case err != nil:
		return l, usageError(err.Error())
	}
	return l, nil
}

// watchedProfiles reads the profiles anew each time it is called, so that a server need not be started again for a
// new one, and logs what is wrong with the files whenever that is not what it was.
func (a *app) watchedProfiles() func() profile.Set {
	var mu sync.Mutex
	told := ""
	return func() profile.Set {
		set := profile.Gather(a.ownProfiles())
		mu.Lock()
		defer mu.Unlock()
		if now := set.Problems.Error(); now != told {
			told = now
			for _, p := range set.Problems {
				a.log.Warn("a profile cannot be used", "file", p.File, "reason", p.Place())
			}
		}
		return set
	}
}
