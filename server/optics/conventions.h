// What holds for every array and sign in the mathematics, written once.
//
// - Arrays are row-major, [frame][row][column]; rows lie along y, columns along x; "point p" is the p-th
//   point inside an aperture in that order (optics/aperture.h).
// - A positive OPD is the longer optical path. Readers of files bring other signs into this one.
// - SI units and radians throughout.
// - Mode 1 is piston, 2 tip (along x), 3 tilt (along y), 4 focus; coefficients are means over points
//   (optics/modes.h).
// - Time averages of squares divide by the number of frames; a standard deviation of a series by one less.
// - Forward Fourier transforms have the minus sign; spectra are one-sided densities that sum to the variance.
#pragma once
