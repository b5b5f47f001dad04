// Package condition turns an acquisition into spokes that every reconstruction can use alike: offset removed, phase
// referred to one delay, k = 0 on a sample, low-passed and thinned to the band the object needs.
//
// It works in two steps, so that the work can be split by delay. Measure looks at the whole acquisition and returns the
// Constants; Condition then makes the Spokes of any subset of delays from them.
//
// Promise: every step is linear in the signal once the constants are known, and unbiased for an object inside the band.
package condition
