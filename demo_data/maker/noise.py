"""Gradient noise from an integer hash: the same on every machine.

Only + - * / and square roots are used, which IEEE 754 rounds in one way; no library's sine,
power or random generator takes part.
"""

from __future__ import annotations

import numpy as np
from numba import njit

_MASK = np.uint64(0xFFFFFFFF)
_C = 0.9238795325112867  # cosine of 22.5 degrees
_S = 0.3826834323650898  # sine of 22.5 degrees
_H = 0.7071067811865476  # half the square root of two
_GRADIENTS = np.array(
    [
        [1, 0], [_C, _S], [_H, _H], [_S, _C], [0, 1], [-_S, _C], [-_H, _H], [-_C, _S],
        [-1, 0], [-_C, -_S], [-_H, -_H], [-_S, -_C], [0, -1], [_S, -_C], [_H, -_H], [_C, -_S],
    ]
)  # fmt: skip


@njit
def hash_cell(ix, iy, seed):
    """Return 32 mixed bits for the lattice point (ix, iy), both above -100000."""
    h = np.uint64(ix + 100000) * np.uint64(374761393) + np.uint64(iy + 100000) * np.uint64(
        668265263
    )
    h = (h + np.uint64(seed) * np.uint64(2246822519)) & _MASK
    h = ((h ^ (h >> np.uint64(15))) * np.uint64(2246822519)) & _MASK
    h = ((h ^ (h >> np.uint64(13))) * np.uint64(3266489917)) & _MASK
    return h ^ (h >> np.uint64(16))


@njit
def _corner(ix, iy, dx, dy, seed):
    """Return the dot product of a corner's gradient with the offset from it."""
    k = np.int64(hash_cell(ix, iy, seed) & np.uint64(15))
    return _GRADIENTS[k, 0] * dx + _GRADIENTS[k, 1] * dy


@njit
def gradient_noise(x, y, seed):
    """Return smooth noise, about -1 to 1, with features one unit wide."""
    ix = np.int64(np.floor(x))
    iy = np.int64(np.floor(y))
    fx = x - ix
    fy = y - iy
    u = fx * fx * fx * (fx * (fx * 6.0 - 15.0) + 10.0)
    v = fy * fy * fy * (fy * (fy * 6.0 - 15.0) + 10.0)
    south = _corner(ix, iy, fx, fy, seed)
    south += u * (_corner(ix + 1, iy, fx - 1.0, fy, seed) - south)
    north = _corner(ix, iy + 1, fx, fy - 1.0, seed)
    north += u * (_corner(ix + 1, iy + 1, fx - 1.0, fy - 1.0, seed) - north)
    return 1.5 * (south + v * (north - south))


@njit
def fractal_noise(x, y, octaves, seed):
    """Return the sum of octaves of noise, each half as wide and half as strong."""
    total = 0.0
    gain = 1.0
    for k in range(octaves):
        total += gain * gradient_noise(x, y, seed + k)
        x = 2.0 * x + 17.3
        y = 2.0 * y - 9.1
        gain *= 0.5
    return total


@njit
def ridged_noise(x, y, octaves, seed):
    """Return ridged multifractal noise, 0 to about 1: sharp crests, wide hollows."""
    total = 0.0
    gain = 0.55
    weight = 1.0
    for k in range(octaves):
        crest = 1.0 - abs(gradient_noise(x, y, seed + k))
        crest = max(0.0, crest) * max(0.0, crest) * weight
        total += gain * crest
        weight = min(1.0, max(0.0, 1.6 * crest))
        x = 2.03 * x + 5.7
        y = 2.03 * y + 31.9
        gain *= 0.5
    return total


@njit
def noise_grid(west, north, rows, cols, cell, width, ridged, octaves, seed):
    """Return noise with features `width` wide at the cell centres, row 0 north."""
    out = np.empty((rows, cols))
    for r in range(rows):
        y = (north - (r + 0.5) * cell) / width
        for c in range(cols):
            x = (west + (c + 0.5) * cell) / width
            if ridged:
                out[r, c] = ridged_noise(x, y, octaves, seed)
            else:
                out[r, c] = fractal_noise(x, y, octaves, seed)
    return out
