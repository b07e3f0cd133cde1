"""Physics: pure NumPy kernels; no files, no labels, no settings."""
