package command

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"syscall"

	"evenshelf/engine/level"
	"evenshelf/store"
	"evenshelf/worker/discover"
)

// recordings returns the engine and the recordings that a command is to work on.
func (a *app) recordings(paths []string) (*level.Engine, []input, error) {
	e, err := a.engine()
	if err != nil {
		return nil, nil, err
	}
	files, err := inputs(a.ctx, paths)
	if err == nil && len(files) == 0 {
		err = usageError("no recordings found there")
	}
	return e, files, err
}

// input is one recording named on the command line, or found in a folder named there.
type input struct {
	path string // as it can be opened
	rel  string // where its copy goes below the output folder, forward slashes
	size int64
	err  error // it could not even be looked at
}

// inputs lists the recordings below paths in order. Where several paths are given, each folder's
// content keeps the folder's name, so that equal names in two folders stay apart. What cannot be looked at is
// listed with its error, after what its folder holds besides.
func inputs(ctx context.Context, paths []string) ([]input, error) {
	var all []input
	for _, path := range paths {
		info, err := os.Stat(path)
		switch {
		case err != nil:
			all = append(all, unread(path, filepath.Base(path), err))
		case !info.IsDir():
			all = append(all, input{path: path, rel: filepath.Base(path), size: info.Size()})
		default:
			prefix := ""
			if len(paths) > 1 {
				abs, err := filepath.Abs(path)
				if err != nil {
					return nil, err
				}
				prefix = filepath.Base(abs) + "/"
			}
			err := discover.Walk(ctx, path, "", func(f store.FoundFile) error {
				all = append(all, input{path: filepath.Join(path, filepath.FromSlash(f.Path)), rel: prefix + f.Path, size: f.Size})
				return nil
			})
			var locked *discover.Unread
			switch {
			case ctx.Err() != nil:
				return nil, context.Cause(ctx)
			case errors.As(err, &locked):
				for i, folder := range locked.Folders {
					all = append(all, unread(filepath.Join(path, filepath.FromSlash(folder)), prefix+folder, locked.Reasons[i]))
				}
			case err != nil:
				all = append(all, unread(path, prefix, err))
			}
		}
	}
	return all, nil
}

// unread is an input that cannot be looked at. Its error names it, and not the system call that failed.
func unread(path, rel string, err error) input {
	var why syscall.Errno
	if errors.As(err, &why) {
		err = why
	}
	return input{path: path, rel: rel, err: fmt.Errorf("%s: %w", path, err)}
}

// inOrder runs work on every item, n at a time, and hands the results to emit in the order of the items. When
// ctx is done it begins nothing more, and returns once what was at work has ended and put its things away.
func inOrder[T, R any](ctx context.Context, n int, items []T, work func(context.Context, T) R, emit func(T, R)) error {
	type turn struct {
		item   T
		result chan R
	}
	queue := make(chan turn, n-1) // the one being waited for is outside the channel
	go func() {
		defer close(queue)
		slots := make(chan struct{}, n)
		for _, item := range items {
			if ctx.Err() != nil {
				return
			}
			t := turn{item, make(chan R, 1)}
			queue <- t
			slots <- struct{}{}
			go func() {
				defer func() { <-slots }()
				t.result <- work(ctx, t.item)
			}()
		}
	}()
	for t := range queue {
		if r := <-t.result; ctx.Err() == nil {
			emit(t.item, r)
		}
	}
	return context.Cause(ctx)
}

// summary is one line about a reading for people.
func summary(a *level.Analysis) string {
	return fmt.Sprintf("%s LUFS  %s LU range  %s dBTP  %s", figure(float64(a.Integrated), 6),
		figure(float64(a.Range), 5), figure(float64(a.TruePeak), 6), duration(a.Duration))
}
