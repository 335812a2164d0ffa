package api

import (
	"fmt"
	"net/http"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/profile"
)

// versioned is a profile with the hash of what it says.
type versioned struct {
	profile.Profile
	Version string `json:"version"`
}

func (a *API) listProfiles(*gin.Context) (int, any, error) {
	all := []versioned{}
	for _, p := range a.Profiles() {
		all = append(all, versioned{p, p.Version()})
	}
	return http.StatusOK, struct {
		Profiles []versioned `json:"profiles"`
	}{all}, nil
}

func (a *API) showProfile(c *gin.Context) (int, any, error) {
	p, ok := a.profile(c.Param("name"))
	if !ok {
		return 0, nil, notFound(fmt.Sprintf("no profile is called %q", c.Param("name")))
	}
	return http.StatusOK, versioned{p, p.Version()}, nil
}

func (a *API) profile(name string) (profile.Profile, bool) {
	for _, p := range a.Profiles() {
		if p.Name == name {
			return p, true
		}
	}
	return profile.Profile{}, false
}
