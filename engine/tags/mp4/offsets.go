package mp4

import (
	"encoding/binary"
	"errors"
	"math"
)

// move says that what lies at an offset of the file or behind it comes to lie so many bytes further on.
type move struct{ from, by int64 }

func (m move) of(at uint64) uint64 {
	if at >= uint64(m.from) && at <= math.MaxInt64 {
		return at + uint64(m.by)
	}
	return at
}

// table is a list of offsets in a box.
type table struct {
	x     *box
	first int // of the body
	wide  bool
	n     int
}

// tableOf finds the offsets in a box of chunk offsets (stco, co64) or of auxiliary information (saio).
func tableOf(x *box) (t table, ok bool, err error) {
	t = table{x: x, first: 8, wide: x.kind == "co64"}
	switch x.kind {
	case "stco", "co64":
	case "saio":
		if len(x.body) < 4 {
			return t, false, damage("a table of offsets breaks off")
		}
		t.wide = x.body[0] == 1
		if x.body[3]&1 != 0 {
			t.first += 8
		}
	default:
		return t, false, nil
	}
	if len(x.body) < t.first {
		return t, false, damage("a table of offsets breaks off")
	}
	t.n = int(be32(x.body[t.first-4:]))
	if t.n > (len(x.body)-t.first)/t.width() {
		return t, false, damage("a table of offsets breaks off")
	}
	return t, true, nil
}

func (t table) width() int {
	if t.wide {
		return 8
	}
	return 4
}

func (t table) get(i int) uint64 {
	if t.wide {
		return be64(t.x.body[t.first+8*i:])
	}
	return uint64(be32(t.x.body[t.first+4*i:]))
}

func (t table) set(i int, v uint64) {
	if t.wide {
		binary.BigEndian.PutUint64(t.x.body[t.first+8*i:], v)
	} else {
		binary.BigEndian.PutUint32(t.x.body[t.first+4*i:], uint32(v))
	}
}

// widen writes a table of chunk offsets in 64 bits.
func (t table) widen() {
	body := append([]byte(nil), t.x.body[:8]...)
	for i := range t.n {
		body = binary.BigEndian.AppendUint64(body, t.get(i))
	}
	t.x.kind, t.x.body = "co64", body
}

// tables returns all tables of offsets in a movie.
func tables(moov *box) (list []table, err error) {
	moov.each(func(stbl *box) {
		if stbl.kind != "stbl" {
			return
		}
		for _, x := range stbl.kids {
			t, ok, e := tableOf(x)
			if err = errors.Join(err, e); ok {
				list = append(list, t)
			}
		}
	})
	return list, err
}

// makeRoom widens the tables of a movie that would not hold what moves. It reports whether there were any, since then
// the movie has grown.
func (m move) makeRoom(moov *box) (grown bool, err error) {
	list, err := tables(moov)
	if err != nil {
		return false, err
	}
	for _, t := range list {
		for i := 0; i < t.n && !t.wide; i++ {
			if m.of(t.get(i)) <= math.MaxUint32 {
				continue
			}
			if t.x.kind == "saio" {
				return false, errors.New("its encryption's offsets have no room for more than 4 GiB")
			}
			t.widen()
			grown = true
			break
		}
	}
	return grown, nil
}

// movie corrects the tables of a movie.
func (m move) movie(moov *box) error {
	if err := movable(moov); err != nil {
		return err
	}
	list, err := tables(moov)
	if err != nil {
		return err
	}
	for _, t := range list {
		for i := range t.n {
			t.set(i, m.of(t.get(i)))
		}
	}
	return nil
}

// movable refuses what points into the file in a way that is not corrected here.
func movable(x *box) (err error) {
	x.each(func(k *box) {
		switch {
		case k.kind == "iloc":
			err = errors.New("it has items that are found by their place in the file, which cannot be moved here")
		case k.kind == "dref" && len(k.body) == 8:
			for _, ref := range k.kids {
				if len(ref.body) >= 4 && ref.body[3]&1 == 0 {
					err = errors.New("some of what it shows is in another file, which is not followed here")
				}
			}
		}
	})
	return err
}

// fragment corrects a fragment (moof) that says in so many words where its sound begins (14496-12, 8.8.7); others
// count from themselves.
func (m move) fragment(moof *box) error {
	for _, traf := range moof.all("traf") {
		if h := traf.child("tfhd"); h != nil && len(h.body) >= 16 && h.body[3]&1 != 0 {
			binary.BigEndian.PutUint64(h.body[8:], m.of(be64(h.body[8:])))
		}
	}
	return nil
}

// index corrects the index of fragments (mfra) at the end of a file (14496-12, 8.8.10).
func (m move) index(mfra *box) error {
	for _, x := range mfra.all("tfra") {
		b := x.body
		if len(b) < 16 {
			return damage("the index of fragments breaks off")
		}
		lengths := be32(b[8:])
		wide, n := 4, int64(be32(b[12:]))
		if b[0] == 1 {
			wide = 8
		}
		entry := 2*wide + 3 + int(lengths>>4&3) + int(lengths>>2&3) + int(lengths&3)
		if n > int64((len(b)-16)/entry) {
			return damage("the index of fragments breaks off")
		}
		for at := 16 + wide; n > 0; n, at = n-1, at+entry {
			if wide == 8 {
				binary.BigEndian.PutUint64(b[at:], m.of(be64(b[at:])))
				continue
			}
			to := m.of(uint64(be32(b[at:])))
			if to > math.MaxUint32 {
				return errors.New("its index of fragments has no room for more than 4 GiB")
			}
			binary.BigEndian.PutUint32(b[at:], uint32(to))
		}
	}
	return nil
}
