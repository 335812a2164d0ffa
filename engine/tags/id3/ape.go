package id3

import (
	"bytes"
	"encoding/binary"
	"slices"
)

const (
	apeMagic    = "APETAGEX"
	apeIsHeader = 1 << 29
	apeHeader   = 1 << 31 // the tag has one
)

// apeTag is an APEv2 tag. Header and footer are of one shape; either may be missing.
type apeTag struct {
	header, footer []byte
	items          []apeItem
}

// apeItem is one item as it lies in the file.
type apeItem struct {
	key string
	raw []byte
}

// parseAPE reads a whole tag. It is not ok unless its items fill it to the last byte.
func parseAPE(b []byte) (t *apeTag, ok bool) {
	t = &apeTag{}
	if len(b) >= apeLen && string(b[:8]) == apeMagic && binary.LittleEndian.Uint32(b[20:])&apeIsHeader != 0 {
		t.header, b = b[:apeLen], b[apeLen:]
	}
	if at := len(b) - apeLen; at >= 0 && string(b[at:at+8]) == apeMagic {
		t.footer, b = b[at:], b[:at]
	}
	told := t.footer != nil && binary.LittleEndian.Uint32(t.footer[20:])&apeHeader != 0 // that there is a header
	if t.footer == nil && t.header == nil || t.footer != nil && told != (t.header != nil) {
		return nil, false
	}
	for len(b) > 0 {
		const fixed = 8 // size of the value and flags, in front of the key
		if len(b) < fixed {
			return nil, false
		}
		size := int64(binary.LittleEndian.Uint32(b))
		key, _, ended := bytes.Cut(b[fixed:], []byte{0})
		n := int64(fixed+len(key)+1) + size
		if !ended || n > int64(len(b)) {
			return nil, false
		}
		t.items = append(t.items, apeItem{string(key), b[:n]})
		b = b[n:]
	}
	return t, true
}

// edited returns the tag, which was parsed from b, after a rule. Gains are added where others were taken out: who had
// none here finds those of ID3v2.
func (t *apeTag) edited(b []byte, r rule, gains [][2]string) []byte {
	var kept []apeItem
	for _, item := range t.items {
		if !r.text(item.key) {
			kept = append(kept, item)
		}
	}
	if len(kept) == len(t.items) {
		return b
	}
	for _, g := range gains {
		raw := binary.LittleEndian.AppendUint32(nil, uint32(len(g[1])))
		raw = append(raw, 0, 0, 0, 0) // UTF-8, may be changed
		kept = append(kept, apeItem{g[0], slices.Concat(raw, []byte(g[0]), []byte{0}, []byte(g[1]))})
	}
	if len(kept) == 0 {
		return nil
	}
	var items []byte
	for _, item := range kept {
		items = append(items, item.raw...)
	}
	size := len(items)
	if t.footer != nil {
		size += apeLen // it counts, the header does not
	}
	edge := func(old []byte) []byte {
		e := slices.Clone(old)
		if e != nil {
			binary.LittleEndian.PutUint32(e[12:], uint32(size))
			binary.LittleEndian.PutUint32(e[16:], uint32(len(kept)))
		}
		return e
	}
	return slices.Concat(edge(t.header), items, edge(t.footer))
}
