package audio

// Bessel0 is the modified Bessel function of the first kind and order 0, by its power series. Kaiser windows are
// made of it.
func Bessel0(x float64) float64 {
	sum, term := 1.0, 1.0
	for n := 1.0; term > sum*1e-17; n++ {
		term *= x * x / (4 * n * n)
		sum += term
	}
	return sum
}
