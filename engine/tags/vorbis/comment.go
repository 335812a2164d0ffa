// Package vorbis reads, edits and writes comment blocks: the tags of FLAC, Ogg Vorbis and Opus.
//
// A block is a vendor (who encoded the sound) and a list of entries "NAME=value". Names may come more than once and in
// any letter case, order means something to people, and values may be megabytes of picture; so entries are kept as the
// bytes they are, also those that break the rules (Vorbis I, 5; RFC 9639, 8.6; RFC 7845, 5.2).
package vorbis

import (
	"encoding/binary"
	"errors"
	"slices"
	"strings"
)

// Vendor is who writes a block where there was none.
const Vendor = "evenshelf"

// ErrDamaged says that a length in a comment block points past the block's end.
var ErrDamaged = errors.New("its comments are damaged")

// Comment is a comment block.
type Comment struct {
	Vendor  string
	Entries []string // "NAME=value", in order
	Rest    []byte   // what follows: Vorbis's framing bit, Opus's padding or binary data; FLAC has none
}

// Parse reads a comment block. If it is damaged, the entries in front of the damage come with ErrDamaged.
func Parse(b []byte) (c Comment, err error) {
	field := func() string {
		n, ok := number(&b)
		if !ok || uint64(n) > uint64(len(b)) {
			err = ErrDamaged
			return ""
		}
		s := string(b[:n])
		b = b[n:]
		return s
	}
	if c.Vendor = field(); err != nil {
		return c, err
	}
	count, ok := number(&b)
	if !ok {
		return c, ErrDamaged
	}
	for range count {
		entry := field()
		if err != nil {
			return c, err
		}
		c.Entries = append(c.Entries, entry)
	}
	c.Rest = slices.Clone(b)
	return c, nil
}

// number takes a 32-bit number off the front of b.
func number(b *[]byte) (n uint32, ok bool) {
	if len(*b) < 4 {
		return 0, false
	}
	n = binary.LittleEndian.Uint32(*b)
	*b = (*b)[4:]
	return n, true
}

// Bytes is the block as it stands in a file.
func (c Comment) Bytes() []byte {
	b := appendField(nil, c.Vendor)
	b = binary.LittleEndian.AppendUint32(b, uint32(len(c.Entries)))
	for _, entry := range c.Entries {
		b = appendField(b, entry)
	}
	return append(b, c.Rest...)
}

func appendField(b []byte, s string) []byte {
	return append(binary.LittleEndian.AppendUint32(b, uint32(len(s))), s...)
}

// Pairs are the entries that have a name, as name and value.
func (c Comment) Pairs() (list [][2]string) {
	for _, entry := range c.Entries {
		if name, value, named := strings.Cut(entry, "="); named {
			list = append(list, [2]string{name, value})
		}
	}
	return list
}

// Edit is a change of a comment block.
type Edit struct {
	Vendor string                 // "": it stays
	Drop   func(name string) bool // entries to leave out; those without a name always stay
	Add    [][2]string            // name and value, put behind the others
}

// Apply changes a block.
func (e Edit) Apply(c *Comment) {
	if e.Vendor != "" {
		c.Vendor = e.Vendor
	}
	c.Entries = slices.DeleteFunc(c.Entries, func(entry string) bool {
		name, _, named := strings.Cut(entry, "=")
		return named && e.Drop(name)
	})
	for _, pair := range e.Add {
		c.Entries = append(c.Entries, pair[0]+"="+pair[1])
	}
}
