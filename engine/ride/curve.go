package ride

// Curve is a gain in dB over time: value i holds at i/10 s, and between two values it runs smoothly.
type Curve []float32
