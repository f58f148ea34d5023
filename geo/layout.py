"""Array layouts and constants that the kernels share.

Units inside the kernels: lengths in cells, altitudes in metres, angles clockwise from grid
north. Rows run south to north. Blocked cells hold +inf.
"""

from __future__ import annotations

import numpy as np

UNREACHED = np.float32(-1e30)  # altitude label of a cell that no path has reached
FAR = 1e30

# par[]: scalars of one solve
CELL_M, LEVEL0_M, LEVEL_STEP_M, CLEARANCE_M, FLOOR_M = 0, 1, 2, 3, 4
BANK_SIN, BANK_COS, RATIO, DOWNDRAFT_MPS, MAX_RUN = 5, 6, 7, 8, 9
JUMP_M, ROOM_M, DETOUR_CELLS, REACTION_CELLS, WIND_ERROR_MPS, N_PAR = 10, 11, 12, 13, 14, 15

# air[level, ...]: glide TAS, its horizontal part, wind towards x and y, all in m/s
TAS, AIR_SPEED, WIND_X, WIND_Y = 0, 1, 2, 3

# anchors[a, ...]; TURNS is 0 where any heading may be taken without a turn, SPEEDS_UP is 0 where
# the speed of the straight glide is flown already
AX, AY, AZ, HX, HY, SIDE, STEP, COUNT, OFFSET, PARENT, TURNS, SPEEDS_UP, N_ANCHOR = range(13)

# state[...]: a ray's start: place, formula altitude, altitude cap, unit track, track index; then
# how many cells it was flown before it ended
SX, SY, SZ, CAP, DX, DY, TRACK, FLOWN, N_STATE = range(9)

# arc[...]: x, y, z, heading x, heading y, then the constants of its steps
ADVANCE, SECONDS, LOSS, WX, WY, Z_FROM, SPEED, WX_PER_M, WY_PER_M = range(5, 14)
COS_HALF, SIN_HALF, SHEAR_S, DIVE, SPEED_UP, N_ARC = range(14, 20)

BLOCK_RAYS = 8  # neighbouring rays tried together once one of them finds new ground
NO_LIMIT = 1 << 30  # as an allowance: never give up
LEAST_GAIN_M = 1.5  # labels are left alone where a bent path is better by less than this
RUN_ON = 4  # cells that a ray goes on over higher labels before it gives up
GRAVITY_MPS2 = 9.80665  # standard gravity, ISO 80000-3
