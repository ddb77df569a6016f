"""ReviewKit: evidence and neutral comments on regressions with a transformed outcome."""

__version__ = "0.1.0"
FORMAT = 1
"""The format number that every file of ours carries; see `contract` in DEVELOPERS.md."""
