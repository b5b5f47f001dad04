// Package singlepoint reconstructs single-point (pure phase) acquisitions: at each sample time t the shots are one
// k-space of their own, k = (γ/2π) G t, whose extent grows with t and whose field of view 1/((γ/2π) ΔG t) shrinks.
//
// It works in steps, so that the work can be split. Describe says what every sample time covers and resolves. Prepare
// looks at the whole acquisition and returns the Plan: phases, windows, noise. Images then makes any of its frames, all
// on one grid, so that a frame-by-frame fit sees the same voxel.
//
// Every frame is the real part of the phased sum
//
//	f(r) = Re Σ_s w_s s_s exp(i2π k_s·r)
//
// with the volume of its k-space cell as the weight of each shot, times the window: signal per mm³ (mm² in 2D), 1 for a
// uniform body of density 1. Voxels outside the circle or sphere of the field of view are NaN.
//
// Gradients on a Cartesian lattice, which may have holes, are summed axis by axis: directly, pairing ±k and ±x, for few
// k per axis, and by chirp-z beyond. Both are exact to rounding on any matrix, so nothing is zero-filled or
// interpolated. Gradients in any other arrangement go through Kaiser-Bessel gridding, each weighted by its Voronoi cell.
package singlepoint
