"""Engine: the energy account and the orientation search for whole grids."""
