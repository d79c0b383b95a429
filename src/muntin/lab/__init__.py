"""Virtual lab: wells whose truth is known, and the reads a bench would take of them."""

from muntin.lab.drawing import Kind, bench_grid, draw_lab
from muntin.lab.errors import Errors, ErrorSizes
from muntin.lab.isotherm import Hydrophobic, Ionic, Isotherm
from muntin.lab.lab import VirtualLab
from muntin.lab.procedure import Procedure
from muntin.lab.reads import PlateReads, Reader
from muntin.lab.stages import Addition, Binding, Fractions, through_stages

__all__ = [
    "Addition",
    "Binding",
    "ErrorSizes",
    "Errors",
    "Fractions",
    "Hydrophobic",
    "Ionic",
    "Isotherm",
    "Kind",
    "PlateReads",
    "Procedure",
    "Reader",
    "VirtualLab",
    "bench_grid",
    "draw_lab",
    "through_stages",
]
