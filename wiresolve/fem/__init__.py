"""Curved finite elements: meshes, matrices, counted eigenpairs, error bars."""
