"""What every test needs: one thread for linear algebra, figures without a screen, repeatable property tests."""

from __future__ import annotations

import os

# Read when NumPy and Matplotlib are first imported, hence before anything else here.
os.environ["OPENBLAS_NUM_THREADS"] = "1"
os.environ["MKL_NUM_THREADS"] = "1"
os.environ["OMP_NUM_THREADS"] = "1"
os.environ["MPLBACKEND"] = "Agg"

from hypothesis import settings

# The same examples in every run, no verdict by the clock, and nothing kept between runs.
settings.register_profile("repeatable", deadline=None, derandomize=True, database=None)
settings.load_profile("repeatable")
