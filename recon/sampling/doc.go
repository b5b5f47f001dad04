// Package sampling weighs k-space samples: how much of the space of directions each spoke stands for, how much of the
// length along a spoke each sample stands for, and the k-windows that every reconstruction shares.
//
// Promise: weights are pure functions of the geometry, in the units in which sums over samples become integrals over
// k-space. To add a window or density weights: one row in Windows or Densities.
package sampling
