// Package mp4 reads and edits the boxes of MP4 and QuickTime files (ISO/IEC 14496-12): what a recording carries
// beside its sound, and the tables that say where the sound lies.
//
// What is not edited is written as it was found, byte for byte. A box of descriptions that breaks the rules of its
// form is kept as it is; only the boxes on the way to the sound have to be in order. The standard's clauses are cited
// from memory.
package mp4

import (
	"encoding/binary"
	"fmt"
	"io"
	"math"
	"slices"
)

// Limits on what a file may claim. They are far outside anything recorded and bound the memory.
const (
	maxDepth  = 12
	maxBoxes  = 1 << 16   // in a movie box; its tables are one box each
	maxMovie  = 128 << 20 // bytes of the movie box: an index of 25 MB is 40 hours of AAC
	maxTop    = 1 << 20   // boxes of the file itself: two for each fragment
	maxOther  = 16 << 20  // bytes of any other box that is read into memory
	boxHead   = 8
	largeHead = 16
)

// box is one box in memory. Its bytes are slices of what was read.
type box struct {
	kind  string // four characters
	large bool   // its size is written in 64 bits
	body  []byte // its content; of one that holds others, what stands in front of them
	kids  []*box // the boxes it holds
	rest  []byte // what is behind them and is no box, such as QuickTime's terminator of four zeros
}

// holders are the boxes that hold others. The structural ones lead to the sound: without them it cannot be found
// again, so they must be in order.
var holders = map[string]struct{ structural bool }{
	"moov": {true}, "trak": {true}, "mdia": {true}, "minf": {true}, "stbl": {true}, "moof": {true}, "traf": {true}, "mfra": {true},
	"udta": {}, "meta": {}, "ilst": {}, "edts": {}, "tref": {}, "dinf": {}, "dref": {},
}

// damage says what is wrong with a file.
func damage(format string, a ...any) error {
	return fmt.Errorf("its MP4 boxes are damaged: "+format, a...)
}

// parse reads the boxes that b consists of; rest is what follows the last of them. left is how many more boxes there
// may be.
func parse(b []byte, depth int, left *int) (list []*box, rest []byte, err error) {
	for len(b) >= boxHead {
		size, head := uint64(be32(b)), boxHead
		if size == 0 { // the terminator of a list; only a file's last box may mean "to the end"
			break
		}
		if size == 1 {
			if head = largeHead; len(b) < head {
				return nil, nil, damage("a size breaks off")
			}
			size = be64(b[8:])
		}
		if size < uint64(head) || size > uint64(len(b)) {
			return nil, nil, damage("box %q has %d bytes where there are %d", b[4:8], size, len(b))
		}
		if *left--; *left < 0 || depth > maxDepth {
			return nil, nil, damage("there are more boxes than in any recording")
		}
		x := &box{kind: string(b[4:8]), large: head == largeHead, body: b[head:size:size]}
		if err := x.open(depth, left); err != nil {
			return nil, nil, err
		}
		list, b = append(list, x), b[size:]
	}
	return list, b, nil
}

// open reads the boxes a box holds, if it is of a kind that does.
func (x *box) open(depth int, left *int) error {
	holder, ok := holders[x.kind]
	if !ok {
		return nil
	}
	skip := x.front()
	if skip > len(x.body) {
		return nil
	}
	kids, rest, err := parse(x.body[skip:], depth+1, left)
	switch {
	case err == nil:
		x.body, x.kids, x.rest = x.body[:skip:skip], kids, rest
	case holder.structural:
		return err
	}
	return nil
}

// front returns how many bytes of a box stand in front of those it holds.
func (x *box) front() int {
	switch {
	case x.kind == "dref":
		return 8
	case x.kind == "meta" && (len(x.body) < 8 || string(x.body[4:8]) != "hdlr"): // QuickTime's has no version and flags
		return 4
	}
	return 0
}

func (x *box) size() int64 {
	n := int64(boxHead+len(x.body)+len(x.rest)) + total(x.kids)
	if x.large || n > math.MaxUint32 {
		n += largeHead - boxHead
	}
	return n
}

func total(list []*box) (n int64) {
	for _, x := range list {
		n += x.size()
	}
	return n
}

// writeTo writes a box and what it holds.
func (x *box) writeTo(w io.Writer) error {
	n, head := x.size(), []byte(nil)
	if x.large || n > math.MaxUint32 {
		head = binary.BigEndian.AppendUint64(append(put32(nil, 1), x.kind...), uint64(n))
	} else {
		head = append(put32(nil, uint32(n)), x.kind...)
	}
	for _, b := range [][]byte{head, x.body} {
		if _, err := w.Write(b); err != nil {
			return err
		}
	}
	for _, k := range x.kids {
		if err := k.writeTo(w); err != nil {
			return err
		}
	}
	_, err := w.Write(x.rest)
	return err
}

// child returns the first box of a kind on the way down, or nil; it works on nil.
func (x *box) child(path ...string) *box {
	for _, kind := range path {
		if x == nil {
			return nil
		}
		at := slices.IndexFunc(x.kids, func(k *box) bool { return k.kind == kind })
		if at < 0 {
			return nil
		}
		x = x.kids[at]
	}
	return x
}

// all returns the boxes of a kind that x holds itself.
func (x *box) all(kind string) (list []*box) {
	if x != nil {
		for _, k := range x.kids {
			if k.kind == kind {
				list = append(list, k)
			}
		}
	}
	return list
}

// each calls f for x and everything below it.
func (x *box) each(f func(*box)) {
	f(x)
	for _, k := range x.kids {
		k.each(f)
	}
}

// drop removes the boxes of the given kinds that x holds itself.
func (x *box) drop(kinds ...string) {
	x.kids = slices.DeleteFunc(x.kids, func(k *box) bool { return slices.Contains(kinds, k.kind) })
}

// replace puts boxes in the place of those of a kind that x holds; without any, at its end.
func (x *box) replace(kind string, with ...*box) {
	at := slices.IndexFunc(x.kids, func(k *box) bool { return k.kind == kind })
	if at < 0 {
		at = len(x.kids)
	}
	x.drop(kind)
	x.kids = slices.Insert(x.kids, at, with...)
}

func be32(b []byte) uint32                { return binary.BigEndian.Uint32(b) }
func be64(b []byte) uint64                { return binary.BigEndian.Uint64(b) }
func put32(b []byte, v uint32) []byte     { return binary.BigEndian.AppendUint32(b, v) }
func full(flags uint32, b ...byte) []byte { return append(put32(nil, flags), b...) }
