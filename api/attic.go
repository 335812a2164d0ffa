package api

import (
	"context"
	"errors"
	"net/http"

	"github.com/gin-gonic/gin"

	"evenshelf/store"
)

func (a *API) listAttic(c *gin.Context) (int, any, error) {
	q, err := queryOf(c)
	if err != nil {
		return 0, nil, err
	}
	asked := store.OriginalQuery{
		ShelfID: q.number("shelf", 1, maxID),
		RunID:   q.number("run", 1, maxID),
		After:   q.number("after", 0, maxID),
		Limit:   int(q.number("limit", 1, pageLimit)),
	}
	if err := q.err(); err != nil {
		return 0, nil, err
	}
	originals, err := a.Store.Originals(c.Request.Context(), asked)
	return http.StatusOK, struct {
		Originals []store.Original `json:"originals"`
	}{list(originals)}, err
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
