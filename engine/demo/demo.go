// Package demo makes a small shelf of recordings to try the engine on: the library of a community radio
// station that does not exist. Nothing is recorded. Voices are a buzzing source through a few resonances,
// songs are oscillators and plucked delay lines played by a short score, crowds and tape hiss are shaped
// noise, and chance comes from a generator seeded with each item's name, so that every run makes the same
// samples (processors of another kind may round differently in the last bit).
//
// The shelf is as ragged as a real one: some 40 recordings from a talk taken at −42 LUFS to a song pressed
// up to −7, speech, music, film and worn tape, mono to 5.1, 22.05 to 96 kHz, PCM, FLAC and lossy, and a
// folder of damaged files; 58 MB in all, or about 70 where there is no FFmpeg to write the lossy ones.
// Every sound item can be brought to −18 LUFS under −1 dBTP with less than 10 dB of limiting; every
// damaged one should end held or failed.
//
// The way of an item is: render (float64 tracks) ─▶ master (to a loudness) ─▶ store ─▶ spoil.
package demo

import (
	"context"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"sync"

	"evenshelf/engine/audio"
	"evenshelf/engine/media"
)

// Item is one file of the demo shelf.
type Item struct {
	Path    string // relative to the shelf, forward slashes
	About   string // one sentence
	Damaged bool   // should end held or failed

	Loudness audio.LUFS         // integrated, of what Build returns; undefined for damaged items
	Spec     media.Spec         // how it is stored
	Build    func() audio.Block // renders the sound at Spec.Format, the same samples every time; nil if there is none

	spoil func(file []byte) []byte // what is done to the finished file; nil for nothing
}

// Write makes every item and stores it under dir, which is made if need be, on as many cores as there
// are. It calls progress, if not nil, after each file, never twice at once. It returns the items as they
// were written: without FFmpeg the lossy ones are FLAC, and so named.
//
// A file that is already there is never overwritten: that is an error. After any error, or when ctx ends,
// what has been written stays, and the error says which file was not.
func Write(ctx context.Context, tools *media.Toolbox, dir string, progress func(done, total int)) ([]Item, error) {
	return write(ctx, tools, dir, Shelf(), progress)
}

// write is Write for any items.
func write(ctx context.Context, tools *media.Toolbox, dir string, items []Item, progress func(done, total int)) ([]Item, error) {
	ctx, cancel := context.WithCancelCause(ctx)
	defer cancel(nil)

	if tools.FFmpeg() == "" {
		for i := range items {
			items[i] = items[i].lossless()
		}
	}
	var (
		work    = make(chan Item)
		workers sync.WaitGroup
		lock    sync.Mutex
		done    int
	)
	for range runtime.GOMAXPROCS(0) {
		workers.Go(func() {
			for it := range work {
				if err := it.write(ctx, tools, dir); err != nil {
					cancel(fmt.Errorf("write demo shelf: %w", err)) // the first one counts
					continue
				}
				lock.Lock()
				done++
				if progress != nil {
					progress(done, len(items))
				}
				lock.Unlock()
			}
		})
	}
	for _, it := range items {
		if ctx.Err() != nil {
			break
		}
		work <- it
	}
	close(work)
	workers.Wait()
	if err := context.Cause(ctx); err != nil {
		return nil, err
	}
	return items, nil
}

// lossless returns the item as it is stored where there is no encoder for lossy codecs.
func (it Item) lossless() Item {
	switch it.Spec.Codec {
	case "mp3", "vorbis":
		it.Path = strings.TrimSuffix(it.Path, it.Spec.Extension)
		it.Spec = flac(it.Spec.Format.Layout, it.Spec.Format.Rate, 16)
		it.Path += it.Spec.Extension
	}
	return it
}

// write makes the item's file.
func (it Item) write(ctx context.Context, tools *media.Toolbox, dir string) error {
	path := filepath.Join(dir, filepath.FromSlash(it.Path))
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		return err
	}
	// Claiming the name first makes sure that nothing of somebody's is lost.
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
	if err != nil {
		return err
	}
	if err := f.Close(); err != nil {
		return err
	}
	if it.Build != nil {
		if err := it.store(ctx, tools, path); err != nil {
			os.Remove(path)
			return err
		}
	}
	if it.spoil == nil {
		return nil
	}
	whole, err := os.ReadFile(path)
	if err != nil {
		return err
	}
	return os.WriteFile(path, it.spoil(whole), 0o644)
}

// store renders the item into the file at path.
func (it Item) store(ctx context.Context, tools *media.Toolbox, path string) error {
	sink, err := tools.Create(ctx, path, it.Spec)
	if err != nil {
		return err
	}
	sound := it.Build()
	view := make(audio.Block, len(sound))
	for at := 0; at < sound.Frames() && err == nil; at += audio.BlockFrames {
		err = sink.WriteBlock(sound.Cut(view, at, min(at+audio.BlockFrames, sound.Frames())))
	}
	if e := sink.Close(); err == nil {
		err = e
	}
	return err
}
