"""Slow twins of the kernels, in plain Python: the same question answered in the plainest way."""

from __future__ import annotations

import math

import numpy as np


def terrain_height(posts, u, v):
    """Return the bilinear height at post coordinates (u, v), NaN off the posts or by a void."""
    n_rows, n_cols = posts.shape
    if not (0.0 <= u <= n_cols - 1 and 0.0 <= v <= n_rows - 1):
        return math.nan
    i, j = min(math.floor(u), n_cols - 2), min(math.floor(v), n_rows - 2)
    s, t = u - i, v - j
    low = posts[j, i] * (1 - s) + posts[j, i + 1] * s
    high = posts[j + 1, i] * (1 - s) + posts[j + 1, i + 1] * s
    return low * (1 - t) + high * t


def terrain_cell(posts, to_posts, row, col, *, edge=200, inside=12, grow=0.0):
    """Return (highest sample, whether any sample is void) of a cell, by dense sampling.

    `to_posts` gives post coordinates of cell coordinates (x = column, y = row); `grow` widens
    the cell on every side [cells]. The highest is -inf where all samples are void.
    """
    near, far = -grow, 1.0 + grow
    along = np.linspace(near, far, edge + 1)
    places = [(x, y) for x in along for y in (near, far)]
    places += [(x, y) for y in along for x in (near, far)]
    lattice = np.linspace(near, far, inside + 1)
    places += [(x, y) for x in lattice for y in lattice]
    heights = [terrain_height(posts, *to_posts(col + x, row + y)) for x, y in places]
    known = [height for height in heights if not math.isnan(height)]
    return max(known, default=-math.inf), len(known) < len(heights)
