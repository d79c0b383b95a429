"""Settings of the laws that are tested on drawn cases."""

from hypothesis import settings

STEADY = settings(deadline=None, derandomize=True)
