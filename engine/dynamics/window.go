package dynamics

// slidingMax is the maximum of the last size values, by the monotonic wedge of D. Lemire, "Streaming
// Maximum-Minimum Filter Using No More than Three Comparisons per Element", Nordic J. Computing 13(4), 2006.
type slidingMax struct {
	size       int
	now        int64
	value      []int64 // ring of candidates, falling from front to back
	when       []int64
	head, tail int // candidates live in [head, tail), indices modulo the ring
}

func newSlidingMax(size int) *slidingMax {
	return &slidingMax{size: size, value: make([]int64, size+1), when: make([]int64, size+1)}
}

func (w *slidingMax) push(v int64) int64 {
	ring := len(w.value)
	for w.tail != w.head && w.value[back(w.tail, ring)] <= v {
		w.tail = back(w.tail, ring)
	}
	w.value[w.tail], w.when[w.tail] = v, w.now
	w.tail = next(w.tail, ring)
	if w.when[w.head] <= w.now-int64(w.size) {
		w.head = next(w.head, ring)
	}
	w.now++
	return w.value[w.head]
}

func next(i, ring int) int {
	if i++; i == ring {
		return 0
	}
	return i
}

func back(i, ring int) int {
	if i == 0 {
		return ring - 1
	}
	return i - 1
}

// box is a running sum over the last len(ring) values, in whole numbers so that it never drifts.
type box struct {
	ring []int64
	at   int
	sum  int64
}

func newBox(n int) box { return box{ring: make([]int64, n)} }

func (b *box) push(v int64) int64 {
	b.sum += v - b.ring[b.at]
	b.ring[b.at] = v
	b.at = next(b.at, len(b.ring))
	return b.sum
}
