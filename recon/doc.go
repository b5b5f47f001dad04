// Package recon is the engine of Torrloom: it turns the exported raw measurements of a pulse EPR oxygen imager into
// pO2 maps. It is pure Go and knows neither browser nor page.
//
// # Conventions, stated once
//
// Units: gradients in mT/m, sampling times in ns, delays in µs, rates in 1/µs, lengths in mm, k in cycles/mm, pO2 in
// torr. A name carries its unit where its type does not (DwellNS, DelayUS, FieldOfViewMM).
//
// Signal: s(k) = ∫ ρ(r) exp(-i2π k·r) dr with k = (γ/2π) G t, t counted from the echo centre or, for a free decay,
// from the pulse.
//
// Space: right-handed x, y, z in mm with the origin at the gradient centre. Arrays are x-fastest. Voxel centres lie at
// (i - floor(n/2))·size, so one voxel sits exactly on the gradient centre.
//
// Amplitudes are quantitative: every reconstruction returns signal per mm³ (per mm² in 2D), so that a uniform body of
// density 1 reconstructs to 1.
//
// Complex data stay complex until the image: the phase is referred to one delay, the real part is reconstructed, and
// the sign of early inversion-recovery images is kept. A voxel without an answer is NaN, counted, and never filled.
//
// Volumes are float32; fits and geometry are float64.
//
// # Flow
//
//	importer → acquisition → condition → a reconstruction → volume per delay → relax → oxygen → exporter
//
// Stages are pure functions of their data and their own settings. Only session remembers anything.
package recon
