"""Ground that can be reached: frames, terrain, wind, solvers, outlines, sections."""
