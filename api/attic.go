package api

import (
	"context"
	"errors"
	"net/http"

	"github.com/gin-gonic/gin"

	"evenshelf/store"
)

// atticQuery reads which page of the attic is asked for. A run that there is not is not found: an empty page would say
// that it has nothing there.
func (a *API) atticQuery(c *gin.Context) (asked store.OriginalQuery, err error) {
	q, err := queryOf(c)
	if err != nil {
		return asked, err
	}
	asked = store.OriginalQuery{
		ShelfID: q.number("shelf", 1, maxID),
		RunID:   q.number("run", 1, maxID),
		After:   q.number("after", 0, maxID),
		Limit:   int(q.number("limit", 1, pageLimit)),
	}
	if err := q.err(); err != nil || asked.RunID == 0 {
		return asked, err
	}
	_, err = a.Store.Run(c.Request.Context(), asked.RunID)
	return asked, err
}

func (a *API) listAttic(c *gin.Context) (int, any, error) {
	asked, err := a.atticQuery(c)
	if err != nil {
		return 0, nil, err
	}
	ctx := c.Request.Context()
	var page struct {
		Originals []store.Original `json:"originals"`
		KeptBy    *[]store.KeptBy  `json:"kept_by,omitempty"`
	}
	originals, err := a.Store.Originals(ctx, asked)
	if err != nil {
		return 0, nil, err
	}
	page.Originals = list(originals)
	if asked.RunID != 0 {
		others, err := a.Store.KeptByOthers(ctx, asked.RunID)
		if err != nil {
			return 0, nil, err
		}
		page.KeptBy = new(list(others))
	}
	return http.StatusOK, page, nil
}

func (a *API) listVersions(c *gin.Context) (int, any, error) {
	asked, err := a.atticQuery(c)
	if err != nil {
		return 0, nil, err
	}
	versions, err := a.Store.Versions(c.Request.Context(), asked)
	return http.StatusOK, struct {
		Versions []store.Version `json:"versions"`
	}{list(versions)}, err
}

// restore brings a recording's original back from the attic.
func (a *API) restore(c *gin.Context) (int, any, error) {
	id, err := pathID(c)
	if err != nil {
		return 0, nil, err
	}
	recording, err := a.Queue.Restore(c.Request.Context(), id)
	return http.StatusOK, recording, err
}

// original is what the attic holds of a recording; nil if it holds nothing.
func (a *API) original(ctx context.Context, recordingID int64) (*store.Original, error) {
	o, err := a.Store.Original(ctx, recordingID)
	if errors.Is(err, store.ErrNotFound) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	return &o, nil
}
