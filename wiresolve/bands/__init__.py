"""Band models: material and orientation to operator coefficients, one file a model."""
