package store

import (
	"context"
	"fmt"
	"testing"
)

const many = 100_000

// BenchmarkStore times what the dashboard does most on a shelf of 100,000 recordings. Aims: a page under
// 50 ms, the spine chart well under 1 s. (TestPagesComeFromAnIndex guards the reason, whatever the machine.)
func BenchmarkStore(b *testing.B) {
	f := open(b)
	f.populate(many)
	f.addShelf("other")
	queries := map[string]RecordingQuery{
		"page/first":              {},
		"page/path on shelf":      {ShelfID: f.shelf.ID},
		"page/held on shelf":      {ShelfID: f.shelf.ID, State: Held},
		"page/done by loudness":   {ShelfID: f.shelf.ID, State: Done, Sort: "before", Desc: true},
		"page/folder":             {ShelfID: f.shelf.ID, Folder: "folder-07"},
		"page/folder by peak":     {ShelfID: f.shelf.ID, Folder: "folder-07", Sort: "peak"},
		"page/search":             {ShelfID: f.shelf.ID, Search: "9999"},
		"page/search for nothing": {ShelfID: f.shelf.ID, Search: "nothing"},
		"page/run by loudness":    {RunID: 1, Sort: "before"},
	}
	for sort := range sortKeys {
		queries["page/by "+sort] = RecordingQuery{ShelfID: f.shelf.ID, Sort: sort, Desc: true}
		queries["page/all shelves by "+sort] = RecordingQuery{Sort: sort}
	}
	for name, q := range queries {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				if _, err := f.Recordings(f.ctx, q); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
	b.Run("page/far down", func(b *testing.B) {
		q := RecordingQuery{ShelfID: f.shelf.ID, Sort: "before", Limit: 1000}
		for range 80 {
			page, err := f.Recordings(f.ctx, q)
			if err != nil {
				b.Fatal(err)
			}
			q.Cursor = page.Next
		}
		q.Limit = 100
		for b.Loop() {
			if _, err := f.Recordings(f.ctx, q); err != nil {
				b.Fatal(err)
			}
		}
	})
	b.Run("spines", func(b *testing.B) {
		for b.Loop() {
			if _, err := f.Spines(f.ctx, f.shelf.ID); err != nil {
				b.Fatal(err)
			}
		}
	})
	b.Run("shelves", func(b *testing.B) {
		for b.Loop() {
			if _, err := f.Shelves(f.ctx); err != nil {
				b.Fatal(err)
			}
		}
	})
	b.Run("held count", func(b *testing.B) {
		for b.Loop() {
			if _, err := f.HeldCount(f.ctx); err != nil {
				b.Fatal(err)
			}
		}
	})
	b.Run("start and finish a job", func(b *testing.B) {
		_, jobs := f.run(Copy)
		for i := 0; b.Loop(); i++ {
			f.start(jobs[i])
			f.finish(jobs[i], done(-30, -18), "x.wav")
		}
	})
}

func BenchmarkScan(b *testing.B) {
	list := files(numbered(many)...)
	f := open(b)
	b.Run("first", func(b *testing.B) {
		for i := 0; b.Loop(); i++ {
			shelf := f.addShelf(fmt.Sprintf("first-%d", i))
			if _, err := f.Found(f.ctx, shelf.ID, "", list); err != nil {
				b.Fatal(err)
			}
		}
	})
	b.Run("again", func(b *testing.B) {
		if _, err := f.Found(f.ctx, f.shelf.ID, "", list); err != nil {
			b.Fatal(err)
		}
		for b.Loop() {
			if _, err := f.Found(f.ctx, f.shelf.ID, "", list); err != nil {
				b.Fatal(err)
			}
		}
	})
	b.Run("create and cancel a run", func(b *testing.B) {
		for b.Loop() {
			run, err := f.CreateRun(f.ctx, NewRun{ShelfID: f.shelf.ID, Profile: someProfile(b), Delivery: Copy},
				func(context.Context, *Tx, []int64) error { return nil })
			if err != nil {
				b.Fatal(err)
			}
			if _, err := f.CancelRun(f.ctx, run.ID); err != nil {
				b.Fatal(err)
			}
		}
	})
}
