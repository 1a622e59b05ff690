"""Claims: phrases, the closed list of kinds, horizons, and the kernels that judge them."""
