// Package compare tells whether two maps of one measurement differ, by how much, and which settings a number hangs on.
//
// It knows nothing of recipes and stages: it is given maps, their standard errors and numbers, and, for sweeps, paths and
// values. What runs the chain calls it.
//
// All members keep these promises. A difference is always the other map less the reference. A voxel that either map
// leaves without an answer (NaN) takes no part and is counted. Two maps made from the same measurement share its noise,
// so their difference is judged by the error of the difference, never by the errors of the two.
//
// To add an outcome that a sweep can follow: one row in Outcomes. To let a sweep move another setting: one row in
// Reasonable.
package compare
