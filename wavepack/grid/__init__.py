"""Space: axes, grids and the transforms between position and wave number."""
