// Package webtest drives Debian's Chromium for tests of pages. A machine without it fails them.
package webtest

import (
	"context"
	"encoding/json"
	"os/exec"
	"slices"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/log"
	"github.com/chromedp/cdproto/runtime"
	"github.com/chromedp/chromedp"
)

// Browser starts a headless Chromium and returns the context of its tab.
func Browser(t *testing.T) context.Context {
	t.Helper()
	if _, err := exec.LookPath("chromium"); err != nil {
		t.Fatal("these tests drive a real browser: install Debian's package chromium")
	}
	options := append(chromedp.DefaultExecAllocatorOptions[:], chromedp.ExecPath("chromium"), chromedp.NoSandbox, chromedp.DisableGPU, chromedp.NoFirstRun,
		chromedp.UserDataDir(t.TempDir()))
	for _, flag := range []string{"disable-quic", "disable-background-networking", "disable-component-update", "disable-sync"} {
		options = append(options, chromedp.Flag(flag, true))
	}
	alloc, stop := chromedp.NewExecAllocator(context.Background(), options...)
	ctx, cancel := chromedp.NewContext(alloc)
	t.Cleanup(func() {
		_ = chromedp.Cancel(ctx) // waits, so that the folder it writes to can be removed
		cancel()
		stop()
	})
	return ctx
}

// Complaints collects what the browser objects to: exceptions, refused styles and scripts, missing files.
func Complaints(t *testing.T, ctx context.Context) func() []string {
	t.Helper()
	var mu sync.Mutex
	var all []string
	err := chromedp.Listen(ctx, func(event any) {
		mu.Lock()
		defer mu.Unlock()
		switch event := event.(type) {
		case *runtime.EventExceptionThrown:
			b, _ := json.Marshal(event.ExceptionDetails)
			all = append(all, string(b))
		case *log.EventEntryAdded:
			if event.Entry.Level == log.EntryLevelError {
				all = append(all, event.Entry.Text+" "+event.Entry.URL)
			}
		}
	})
	if err != nil {
		t.Fatal(err)
	}
	return func() []string {
		mu.Lock()
		defer mu.Unlock()
		return slices.Clone(all)
	}
}

// Do takes steps one after the other.
func Do(t *testing.T, ctx context.Context, steps ...chromedp.Action[chromedp.Void]) {
	t.Helper()
	if err := chromedp.Do(ctx, steps...); err != nil {
		t.Fatal(err)
	}
}

// Eval returns what a script evaluates to.
func Eval[T any](t *testing.T, ctx context.Context, script string) T {
	t.Helper()
	v, err := eval[T](ctx, script)
	if err != nil {
		t.Fatalf("%v in %s", err, script)
	}
	return v
}

func eval[T any](ctx context.Context, script string) (T, error) {
	return chromedp.Run(ctx, chromedp.Evaluate[T](script, chromedp.EvalAwaitPromise))
}

// Until waits until a condition in the page comes true, and fails if it has not by the limit. A page that is just
// being left cannot be asked; the next one can.
func Until(t *testing.T, ctx context.Context, limit time.Duration, condition string) {
	t.Helper()
	end := time.Now().Add(limit)
	for {
		met, err := eval[bool](ctx, condition)
		switch {
		case met && err == nil:
			return
		case time.Now().After(end) && err != nil:
			t.Fatalf("%v in %s", err, condition)
		case time.Now().After(end):
			t.Fatalf("never came true: %s\n%s", condition, Eval[string](t, ctx, "document.querySelector('main').innerText"))
		}
		time.Sleep(20 * time.Millisecond)
	}
}
