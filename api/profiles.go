package api

import (
	"errors"
	"fmt"
	"io"
	"mime"
	"net/http"
	"strings"

	"github.com/gin-gonic/gin"

	"evenshelf/engine/profile"
)

// unusable is a file of the operator's profiles folder, or the folder itself, and one thing wrong with it.
type unusable struct {
	File  string `json:"file"`
	Words string `json:"words"`
}

func (a *API) listProfiles(*gin.Context) (int, any, error) {
	set := a.Profiles()
	all, problems := []profile.Described{}, []unusable{}
	for _, l := range set.All {
		all = append(all, l.Described())
	}
	for _, c := range set.Problems {
		problems = append(problems, unusable{c.File, c.Place()})
	}
	return http.StatusOK, struct {
		Profiles []profile.Described `json:"profiles"`
		Problems []unusable          `json:"problems"`
	}{all, problems}, nil
}

func (a *API) showProfile(c *gin.Context) (int, any, error) {
	l, err := a.listed(c.Param("name"))
	if err != nil {
		return 0, nil, notFound(err.Error())
	}
	return http.StatusOK, l.Described(), nil
}

// checkedProfile is what is to be said about a TOML text.
type checkedProfile struct {
	Valid    bool                `json:"valid"`
	Profile  *profile.Described  `json:"profile"` // nil unless it is valid
	Problems []profile.Complaint `json:"problems"`
}

// checkProfile reads a profile and keeps nothing of it.
func (a *API) checkProfile(c *gin.Context) (int, any, error) {
	if t, _, err := mime.ParseMediaType(c.GetHeader("Content-Type")); err != nil || (t != "text/plain" && t != "application/toml") {
		return 0, nil, kindMediaType.with("the body has to be text/plain or application/toml")
	}
	text, err := io.ReadAll(http.MaxBytesReader(c.Writer, c.Request.Body, profile.LargestFile))
	if err != nil {
		return 0, nil, err
	}
	p, err := profile.Parse("", text)
	var wrong profile.Complaints
	if errors.As(err, &wrong) {
		return http.StatusOK, checkedProfile{Problems: wrong}, nil
	}
	d := profile.Listed{Profile: p, Source: profile.Own}.Described()
	return http.StatusOK, checkedProfile{true, &d, []profile.Complaint{}}, nil
}

// listed returns the profile a request names; the error is words for the one who asked.
func (a *API) listed(name string) (profile.Listed, error) {
	l, err := a.Profiles().Named(name)
	switch {
	case errors.Is(err, profile.ErrUnknown):
		return l, fmt.Errorf("no profile is called %q", name)
	case err != nil:
		return l, errors.New(strings.ReplaceAll(err.Error(), "\n", "; "))
	}
	return l, nil
}
