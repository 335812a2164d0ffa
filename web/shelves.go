package web

import (
	"net/http"

	"github.com/gin-gonic/gin"

	"evenshelf/store"
)

// shelfView is a shelf as its section of a page shows it.
type shelfView struct {
	store.ShelfSummary
	Never        int      // neither done, held nor failed
	Unmeasured   int      // without a reading
	Spread       *float64 // quietest to loudest as they arrived, LU
	SpreadAfter  *float64
	Tolerance    *float64 // of the profile that levelled it last, LU
	Measurements bool     // the last run only measured
	Going        bool     // the last run has not ended yet
	Whole        bool     // the shelf has a page, or the start page, to itself
	TakesUploads bool     // it is the one shelf that does
}

func viewShelf(s store.ShelfSummary) shelfView {
	v := shelfView{
		ShelfSummary: s,
		Never:        max(s.Recordings-s.Done-s.Held-s.Failed, 0),
		Unmeasured:   max(s.Recordings-s.Measured, 0),
		Spread:       spread(s.Quietest, s.Loudest),
		SpreadAfter:  spread(s.QuietestAfter, s.LoudestAfter),
	}
	v.TakesUploads = s.Name == store.UploadShelf
	if s.LastRun != nil {
		v.Tolerance = known(s.LastRun.Tolerance)
		v.Measurements = !s.LastRun.Delivery.Levels()
		v.Going = going(s.LastRun.State)
	}
	return v
}

type shelvesPage struct {
	Shelves []shelfView
	// Uploads is the upload shelf while it is empty: the server makes it at its first start, and until
	// something is in it, it is a form rather than a shelf.
	Uploads *shelfView
}

func (s *Site) shelves(c *gin.Context) {
	all, err := s.store.Shelves(c.Request.Context())
	if err != nil {
		s.fail(c, err)
		return
	}
	var p shelvesPage
	for _, sh := range all {
		v := viewShelf(sh)
		if v.TakesUploads && v.Recordings == 0 {
			p.Uploads = &v
			continue
		}
		p.Shelves = append(p.Shelves, v)
	}
	if len(p.Shelves) == 1 {
		p.Shelves[0].Whole = true
	}
	s.render(c, http.StatusOK, "shelves", p)
}

type shelfPage struct {
	shelfView
	Kept store.AtticCount
}

func (s *Site) shelf(c *gin.Context) {
	n, err := id(c)
	if err != nil {
		s.fail(c, err)
		return
	}
	sh, err := s.store.Shelf(c.Request.Context(), n)
	if err != nil {
		s.fail(c, err)
		return
	}
	p := shelfPage{shelfView: viewShelf(sh)}
	p.Whole = true
	if p.Kept, err = s.store.AtticOf(c.Request.Context(), n); err != nil {
		s.fail(c, err)
		return
	}
	s.render(c, http.StatusOK, "shelf", p)
}
