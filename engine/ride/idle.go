package ride

import (
	"math"
	"slices"
)

// What a ride has to do to be worth making. What has been ridden once asks for less.
const (
	leastReach = 1.5  // dB
	leastApart = 2.5  // dB, where the range is what it should be and voices are all there is to bring together
	leastWay   = 0.25 // of the way from the range that there is to the one asked for
)

// Reach is how far the gain goes from its median for all but a tenth of the time in which something is heard, dB.
func (r Ride) Reach() float64 {
	var gains []float64
	for i, on := range r.Active {
		if on {
			gains = append(gains, float64(r.Gain[i]+r.Gain[i+1])/2)
		}
	}
	if len(gains) == 0 {
		return 0
	}
	slices.Sort(gains)
	median := gains[len(gains)/2]
	for i, g := range gains {
		gains[i] = math.Abs(g - median)
	}
	slices.Sort(gains)
	return gains[(len(gains)-1)*9/10]
}

// Idle reports whether the ride would change so little that the recording is even enough as it is, or would not come
// near its range, so that what has been ridden as far as it can be is not ridden again.
func (r Ride) Idle() bool { return r.least == 0 || r.Reach() < r.least || r.way < leastWay }
