package api

import (
	"errors"
	"fmt"
	"io/fs"
	"net/http"
	"os"
	"path/filepath"

	"github.com/gin-gonic/gin"

	"evenshelf/store"
)

func (a *API) listShelves(c *gin.Context) (int, any, error) {
	shelves, err := a.Store.Shelves(c.Request.Context())
	return http.StatusOK, struct {
		Shelves []store.ShelfSummary `json:"shelves"`
	}{list(shelves)}, err
}

func (a *API) showShelf(c *gin.Context) (int, any, error) {
	shelf, err := a.pathShelf(c)
	return http.StatusOK, shelf, err
}

// pathShelf returns the shelf the route names.
func (a *API) pathShelf(c *gin.Context) (store.ShelfSummary, error) {
	id, err := pathID(c)
	if err != nil {
		return store.ShelfSummary{}, err
	}
	return a.Store.Shelf(c.Request.Context(), id)
}

func (a *API) addShelf(c *gin.Context) (int, any, error) {
	var asked newShelf
	if err := readJSON(c, &asked, false); err != nil {
		return 0, nil, err
	}
	shelf, err := a.placed(asked)
	if err != nil {
		return 0, nil, err
	}
	ctx := c.Request.Context()
	if shelf, err = a.Store.AddShelf(ctx, shelf); err != nil {
		return 0, nil, err
	}
	summary, err := a.Store.Shelf(ctx, shelf.ID)
	c.Header("Location", fmt.Sprintf("/api/v1/shelves/%d", shelf.ID))
	return http.StatusCreated, summary, err
}

func (a *API) scanShelf(c *gin.Context) (int, any, error) {
	shelf, err := a.pathShelf(c)
	if err != nil {
		return 0, nil, err
	}
	var asked struct {
		Folder string `json:"folder"`
	}
	if err := readJSON(c, &asked, true); err != nil {
		return 0, nil, err
	}
	folder, err := folderOf(asked.Folder)
	if err != nil {
		return 0, nil, invalid(complaint{"folder", err.Error()})
	}
	if err := folderExists(shelf.Shelf, folder); err != nil {
		return 0, nil, err
	}
	result, err := a.Queue.Scan(c.Request.Context(), shelf.ID, folder)
	return http.StatusOK, result, err
}

// folderExists looks inside the shelf's root. A root that cannot be opened (a disk that is not mounted) is a
// state of the shelf; a folder that is not there is a mistake in the request.
func folderExists(shelf store.Shelf, folder string) error {
	root, err := os.OpenRoot(shelf.Root)
	if err != nil {
		return kindState.with(fmt.Sprintf("the folder of shelf %q cannot be opened: %s", shelf.Name, reasonOf(err)))
	}
	defer root.Close()
	if folder == "" {
		return nil
	}
	if info, err := root.Stat(filepath.FromSlash(folder)); err != nil || !info.IsDir() {
		return invalid(complaint{"folder", fmt.Sprintf("%q is not a folder on shelf %q", folder, shelf.Name)})
	}
	return nil
}

// reasonOf is the reason of a file error without the path it names.
func reasonOf(err error) string {
	var pe *fs.PathError
	if errors.As(err, &pe) {
		return pe.Err.Error()
	}
	return err.Error()
}

// list makes a nil slice an empty one, because JSON clients iterate over what they get.
func list[T any](s []T) []T {
	if s == nil {
		return []T{}
	}
	return s
}
