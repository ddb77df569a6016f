"""What all tests share: hypothesis draws the same examples everywhere, and nothing is drawn on a screen."""

import os

from hypothesis import settings

os.environ.setdefault("MPLBACKEND", "Agg")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # two test processes would otherwise fight over the cores
settings.register_profile("checks", derandomize=True, deadline=None, print_blob=True)
settings.load_profile("checks")
