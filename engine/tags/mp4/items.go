package mp4

import (
	"slices"
	"strings"

	"evenshelf/engine/tags"
)

// freeform is the reverse-domain name under which players look for items that have no four-character name of
// their own.
const freeform = "\x63\x6F\x6D\x2E\x61\x70\x70\x6C\x65\x2E\x69\x54\x75\x6E\x65\x73"

// namesOf returns what names the items of a list of metadata in words: a freeform item has its own, where the list has
// keys the number of an item stands for one. Others have none.
func namesOf(meta *box) func(item *box) string {
	var keys []*box // a key is shaped like a box: its length, the name space, the name
	if x := meta.child("keys"); x != nil && len(x.body) >= 8 {
		keys = parts(x.body[8:])
	}
	return func(item *box) string {
		if item.kind == "----" {
			for _, p := range parts(item.body) {
				if p.kind == "name" && len(p.body) >= 4 {
					return string(p.body[4:])
				}
			}
		} else if n := be32([]byte(item.kind)); n >= 1 && uint64(n) <= uint64(len(keys)) {
			return string(keys[n-1].body)
		}
		return ""
	}
}

// parts reads the boxes in an item, of which none holds others.
func parts(b []byte) []*box {
	left := maxBoxes
	list, _, _ := parse(b, maxDepth, &left)
	return list
}

// dropItems removes the items of all lists below x that are to go.
func dropItems(x *box, gone func(kind, name string) bool) {
	x.each(func(meta *box) {
		if list := meta.child("ilst"); meta.kind == "meta" && list != nil {
			name := namesOf(meta)
			list.kids = slices.DeleteFunc(list.kids, func(item *box) bool { return gone(item.kind, name(item)) })
		}
	})
}

// untrue reports whether an item describes the sound as it was before levelling, or the encoder that made it.
func untrue(kind, name string) bool {
	return kind == tool || tags.Stale(name) || strings.EqualFold(name, "encoder") || strings.EqualFold(name, "Encoding Params")
}

// tool is the item, and QuickTime's box, that names what a file was encoded with. A levelled copy was encoded anew
// with something else.
const tool = "\xA9too"

// level removes everything below x that is no longer true of a levelled copy.
func level(x *box) {
	dropItems(x, untrue)
	x.each(func(k *box) {
		if k.kind == "udta" {
			k.drop("ludt", "tlou", "alou", tool) // loudness boxes
		}
	})
}

// setGains replaces the gain items of a movie.
func setGains(moov *box, g tags.Gains) error {
	dropItems(moov, func(_, name string) bool { return tags.IsGain(name) })
	list, err := itemList(moov)
	if err != nil {
		return err
	}
	for _, pair := range g.ReplayGain() {
		list.kids = append(list.kids, named(strings.ToLower(pair[0]), pair[1:]))
	}
	return nil
}

// itemList returns the list of items that players read, moov/udta/meta/ilst. What is missing on the way is made.
func itemList(moov *box) (*box, error) {
	udta := moov.child("udta")
	if udta == nil {
		udta = &box{kind: "udta"}
		moov.kids = append(moov.kids, udta)
	}
	at := slices.IndexFunc(udta.kids, func(k *box) bool { return k.kind == "meta" && handlerOf(k) == "mdir" })
	if len(udta.body) > 0 || at < 0 && slices.ContainsFunc(udta.kids, func(k *box) bool { return k.kind == "meta" && len(k.kids) == 0 }) {
		return nil, damage("its tags cannot be read")
	}
	if at < 0 {
		meta := &box{kind: "meta", body: full(0), kids: []*box{{kind: "hdlr", body: []byte("\x00\x00\x00\x00\x00\x00\x00\x00mdirappl\x00\x00\x00\x00\x00\x00\x00\x00\x00")}}}
		at, udta.kids = len(udta.kids), append(udta.kids, meta)
	}
	meta := udta.kids[at]
	list := meta.child("ilst")
	if list == nil {
		list = &box{kind: "ilst"}
		meta.kids = append(meta.kids, list)
	}
	if len(list.body) > 0 {
		return nil, damage("its tags cannot be read")
	}
	return list, nil
}
