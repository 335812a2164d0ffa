package command

import (
	"context"
	"errors"
	"fmt"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"time"

	"github.com/gin-gonic/gin"

	"evenshelf/api"
	"evenshelf/store"
	"evenshelf/web"
	"evenshelf/worker"
)

// server is a running Evenshelf: database, queue, API and dashboard.
type server struct {
	url    string
	store  *store.Store
	queue  *worker.Service
	http   *http.Server
	hangUp context.CancelFunc // ends event streams, which Shutdown would wait for
	failed chan error         // receives if the listener breaks
}

type serverOptions struct {
	data       string
	listen     string
	shelfRoots []string
	anyHost    bool
	shelves    map[string]string // folders, by the names they are registered under
}

// startServer wires the rooms together and returns once the server answers.
func (a *app) startServer(o serverOptions) (_ *server, err error) {
	s := &server{failed: make(chan error, 1)}
	defer func() {
		if err != nil {
			s.stop()
		}
	}()
	engine, err := a.engine()
	if err != nil {
		return nil, err
	}
	if _, err := a.profiles(); err != nil {
		return nil, err
	}
	listener, err := net.Listen("tcp", o.listen)
	if err != nil {
		return nil, err
	}
	defer func() {
		if err != nil {
			listener.Close()
		}
	}()
	s.url = fmt.Sprintf("http://%s/", listener.Addr())

	if s.store, err = store.Open(a.ctx, store.Options{Path: filepath.Join(o.data, "evenshelf.db")}); err != nil {
		return nil, err
	}
	uploads := filepath.Join(o.data, "uploads")
	if err := os.MkdirAll(uploads, 0o700); err != nil {
		return nil, err
	}
	copies := filepath.Join(o.data, "copies")
	if err := a.ensureShelf(s.store, store.UploadShelf, uploads, copies); err != nil {
		return nil, err
	}
	for name, root := range o.shelves { // before anybody is answered, who would miss them
		if err := a.ensureShelf(s.store, name, root, copies); err != nil {
			return nil, err
		}
	}
	if s.queue, err = worker.New(worker.Options{Store: s.store, Engine: engine, Log: a.log, Workers: a.workers()}); err != nil {
		return nil, err
	}

	gin.SetMode(gin.ReleaseMode)
	router := gin.New()
	options := api.Options{
		Store: s.store, Queue: s.queue, Log: a.log, Version: Version, Profiles: a.watchedProfiles(), Media: engine.Media,
		ShelfRoots: o.shelfRoots, UploadDir: uploads, CopiesDir: copies,
	}
	if !o.anyHost {
		options.Hosts = append([]string{listener.Addr().(*net.TCPAddr).IP.String()}, loopbackHosts...)
	}
	service, err := api.New(options)
	if err != nil {
		return nil, err
	}
	service.Register(router)
	site, err := web.New(s.store)
	if err != nil {
		return nil, err
	}
	site.Register(router)
	router.NoRoute(site.NotFound)

	if err := s.queue.Start(a.ctx); err != nil {
		return nil, err
	}
	base, hangUp := context.WithCancel(context.Background())
	s.hangUp = hangUp
	s.http = &http.Server{
		Handler:           router,
		BaseContext:       func(net.Listener) context.Context { return base },
		ReadHeaderTimeout: 10 * time.Second,
		IdleTimeout:       2 * time.Minute,
	}
	go func() {
		if err := s.http.Serve(listener); !errors.Is(err, http.ErrServerClosed) {
			s.failed <- err
		}
	}()
	return s, nil
}

// loopbackHosts are the names a browser on this machine may use beside the address that was asked for; any other
// name is a page elsewhere that had its own name pointed here.
var loopbackHosts = []string{"localhost", "127.0.0.1", "::1"}

// ensureShelf registers a shelf unless one of that name is there with the same root.
func (a *app) ensureShelf(st *store.Store, name, root, copies string) error {
	root, err := realPath(root)
	if err != nil {
		return err
	}
	known, err := st.ShelfNamed(a.ctx, name)
	switch {
	case errors.Is(err, store.ErrNotFound):
		_, err = st.AddShelf(a.ctx, store.Shelf{Name: name, Root: root, Copies: filepath.Join(copies, name)})
		return err
	case err != nil:
		return err
	case known.Root != root:
		return fmt.Errorf("shelf %s is %s already; it cannot also be %s", name, known.Root, root)
	}
	return nil
}

// lastReplies is how long requests that are being answered get to end once the server is told to stop.
const lastReplies = 3 * time.Second

// stop ends everything in reverse order: no new requests, then the queue (jobs at work are put back),
// then the database. It may be called on a half-started server.
func (s *server) stop() error {
	ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
	defer cancel()
	var errs []error
	if s.http != nil {
		s.hangUp()
		soon, cancel := context.WithTimeout(ctx, lastReplies)
		defer cancel()
		if s.http.Shutdown(soon) != nil { // somebody's player is paused in the middle of a recording
			errs = append(errs, s.http.Close())
		}
	}
	if s.queue != nil {
		errs = append(errs, s.queue.Stop(ctx))
	}
	if s.store != nil {
		errs = append(errs, s.store.Close())
	}
	return errors.Join(errs...)
}
