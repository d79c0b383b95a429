"""The plate itself: well positions and layout."""

from muntin.bench.layout import default_controls, lay_out
from muntin.bench.wells import centre, normalise, perimeter, well_names, well_range

__all__ = [
    "centre",
    "default_controls",
    "lay_out",
    "normalise",
    "perimeter",
    "well_names",
    "well_range",
]
