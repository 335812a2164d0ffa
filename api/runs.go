package api

import (
	"errors"
	"fmt"
	"net/http"
	"slices"
	"strings"

	"github.com/gin-gonic/gin"
	"golang.org/x/sys/unix"

	"evenshelf/engine/profile"
	"evenshelf/store"
)

// runRequest asks for a run. Recordings absent means everything in the folder.
type runRequest struct {
	ShelfID    int64          `json:"shelf_id"`
	Folder     string         `json:"folder"`
	Recordings []int64        `json:"recordings"`
	Profile    string         `json:"profile"`
	Delivery   store.Delivery `json:"delivery"`
	Format     profile.Format `json:"format"`
	BitRate    int            `json:"bit_rate_kbps"`
	Group      profile.Group  `json:"group"`
}

func (a *API) startRun(c *gin.Context) (int, any, error) {
	var asked runRequest
	if err := readJSON(c, &asked, false); err != nil {
		return 0, nil, err
	}
	n, errs := a.newRun(asked)
	ctx := c.Request.Context()
	if asked.ShelfID >= 1 {
		// A shelf that is not there is a mistake in the body, not a wrong address.
		shelf, err := a.Store.Shelf(ctx, asked.ShelfID)
		switch {
		case errors.Is(err, store.ErrNotFound):
			errs = append(errs, complaint{"shelf_id", fmt.Sprintf("there is no shelf %d", asked.ShelfID)})
		case err != nil:
			return 0, nil, err
		case asked.Delivery.Writes():
			if err := writable(shelf.Root); err != nil {
				errs = append(errs, complaint{"delivery", fmt.Sprintf("%s has to write to the folder of shelf %q, and that is not possible here (%s)", asked.Delivery, shelf.Name, err)})
			}
		}
	}
	if len(errs) > 0 {
		return 0, nil, invalid(errs...)
	}
	run, err := a.Queue.StartRun(ctx, n)
	if errors.Is(err, store.ErrNotFound) {
		return 0, nil, invalid(complaint{"recordings", err.Error()})
	}
	if errors.Is(err, store.ErrFormat) {
		return 0, nil, invalid(complaint{"format", strings.TrimSuffix(err.Error(), ": "+store.ErrFormat.Error())})
	}
	if err != nil {
		return 0, nil, err
	}
	c.Header("Location", fmt.Sprintf("/api/v1/runs/%d", run.ID))
	return http.StatusCreated, run, nil
}

// writable reports why this process cannot make and remove files in a folder, nil if it can: a shelf is often
// mounted read-only, and a run should not start only for each of its recordings to fail.
func writable(dir string) error {
	return unix.Faccessat(unix.AT_FDCWD, dir, unix.W_OK|unix.X_OK, unix.AT_EACCESS)
}

// newRun checks all that can be checked without asking the store.
func (a *API) newRun(asked runRequest) (n store.NewRun, errs []complaint) {
	folder, err := folderOf(asked.Folder)
	if err != nil {
		errs = append(errs, complaint{"folder", err.Error()})
	}
	if asked.ShelfID < 1 {
		errs = append(errs, complaint{"shelf_id", "has to be given"})
	}
	p, err := a.listed(asked.Profile)
	if err != nil {
		errs = append(errs, complaint{"profile", err.Error()})
	}
	if !slices.Contains(store.Deliveries, asked.Delivery) {
		errs = append(errs, complaint{"delivery", fmt.Sprintf("%q is not one of measure, copy, replace, tags", asked.Delivery)})
	}
	own, complaints := asked.profile(p.Profile)
	errs = append(errs, complaints...)
	ids := slices.Clone(asked.Recordings)
	slices.Sort(ids)
	ids = slices.Compact(ids)
	switch {
	case asked.Recordings == nil:
	case len(ids) == 0:
		errs = append(errs, complaint{"recordings", "is an empty list; leave it out for all recordings"})
	case ids[0] < 1:
		errs = append(errs, complaint{"recordings", fmt.Sprintf("%d is not the id of a recording", ids[0])})
	case folder != "":
		errs = append(errs, complaint{"recordings", "cannot go together with folder"})
	}
	return store.NewRun{ShelfID: asked.ShelfID, Folder: folder, Recordings: ids, Profile: own, Delivery: asked.Delivery}, errs
}

// profile is the profile as the run is to have it.
func (asked runRequest) profile(p profile.Profile) (own profile.Profile, errs []complaint) {
	if p.Name == "" { // that has been said
		return p, nil
	}
	if !asked.Delivery.Levels() {
		why := fmt.Sprintf("means nothing with delivery %s, which encodes no sound", asked.Delivery)
		if asked.Format != "" {
			errs = append(errs, complaint{"format", why})
		}
		if asked.BitRate != 0 {
			errs = append(errs, complaint{"bit_rate_kbps", why})
		}
		if errs != nil {
			return p, errs
		}
	}
	if asked.Delivery == store.Tags {
		p = p.ForTags()
	}
	own, err := p.With(profile.Wishes{Format: asked.Format, BitRate: asked.BitRate, Group: asked.Group})
	var all profile.Complaints
	if errors.As(err, &all) {
		for _, c := range all {
			errs = append(errs, complaint{strings.TrimPrefix(c.Field, "delivered."), c.Words})
		}
	}
	return own, errs
}

func (a *API) listRuns(c *gin.Context) (int, any, error) {
	q, err := queryOf(c)
	if err != nil {
		return 0, nil, err
	}
	limit, before := q.number("limit", 1, pageLimit), q.number("before", 1, maxID)
	if err := q.err(); err != nil {
		return 0, nil, err
	}
	if limit == 0 {
		limit = 100
	}
	runs, err := a.Store.Runs(c.Request.Context(), int(limit), before)
	return http.StatusOK, struct {
		Runs []store.Run `json:"runs"`
	}{list(runs)}, err
}

func (a *API) showRun(c *gin.Context) (int, any, error) {
	id, err := pathID(c)
	if err != nil {
		return 0, nil, err
	}
	run, err := a.Store.Run(c.Request.Context(), id)
	return http.StatusOK, run, err
}

func (a *API) cancelRun(c *gin.Context) (int, any, error) {
	id, err := pathID(c)
	if err != nil {
		return 0, nil, err
	}
	run, err := a.Queue.CancelRun(c.Request.Context(), id)
	return http.StatusOK, run, err
}

func (a *API) listJobs(c *gin.Context) (int, any, error) {
	id, err := pathID(c)
	if err != nil {
		return 0, nil, err
	}
	q, err := queryOf(c)
	if err != nil {
		return 0, nil, err
	}
	asked := store.JobQuery{
		RunID: id,
		State: store.JobState(q.choice("state", jobStates()...)),
		After: q.number("after", 0, maxID),
		Limit: int(q.number("limit", 1, pageLimit)),
	}
	if err := q.err(); err != nil {
		return 0, nil, err
	}
	ctx := c.Request.Context()
	if _, err := a.Store.Run(ctx, id); err != nil { // an empty list would hide that there is no such run
		return 0, nil, err
	}
	jobs, err := a.Store.Jobs(ctx, asked)
	return http.StatusOK, struct {
		Jobs []store.Job `json:"jobs"`
	}{list(jobs)}, err
}
