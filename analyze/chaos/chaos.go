// Package chaos tells whether a motion is chaotic, and how fast what is known of
// it is lost. What comes in: series at even steps of time, states made of them
// (analyze/recurrence), or the equations of a motion. What goes out: an
// embedding (delay, dimension), the largest exponent in 1/s with its straight
// stretch, the 0–1 test's K, the correlation dimension with its scaling range,
// sections on natural events, surrogate tests, and from equations all exponents;
// each with a standard uncertainty and the curves that show it. Times are in s,
// exponents in 1/s (nats), everything else in the series' own unit.
//
// Nothing here calls a motion chaotic by one number: noise, decay and
// quasi-periodic motion each deceive one of the measures. Assess puts them
// together.
package chaos

// Value is a number with its standard uncertainty.
type Value struct{ V, U float64 }
