package audio

// StepsPerSecond is the grid on which a recording's course is described: one value every 100 ms.
const StepsPerSecond = 10

// Boundary returns the frame at which n parts of a second end, of which there are perSecond, at a rate in Hz:
// the nearest whole one. Whatever is described on a grid goes by it, so that all curves have one length.
func Boundary(n, perSecond, rate int64) int64 { return (2*n*rate + perSecond) / (2 * perSecond) }
