// Package forward computes what an image would have given as data, so that it can be held against what was recorded.
//
// All members keep one promise: lengths in mm, integrals in units of the image times mm² (3D) or mm (2D), nothing remembered
// between calls. To add one: a function of an image and of where to look, and the exact case it is tested by.
package forward
