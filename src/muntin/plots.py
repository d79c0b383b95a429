"""The figures of a report, one function each, for notebooks.

Each takes an assessment (`protein` a study) and draws on the matplotlib axes given, or on a new
figure that pyplot does not know of: nothing is left open, and as the last value of a notebook's
cell the axes returned show their figure. `axes.get_figure().savefig(path)` keeps it. `together`
and `forecast` have several panels, take as many axes, and return them all.
"""

from muntin.report.factor_figure import factor
from muntin.report.forecast_figure import forecast
from muntin.report.joint_figure import joint
from muntin.report.plates_figure import controls, errors
from muntin.report.predicted_figure import predicted
from muntin.report.protein_figure import protein
from muntin.report.sides_figure import sides
from muntin.report.together_figure import together
from muntin.report.window_map import window_map

__all__ = [
    "controls",
    "errors",
    "factor",
    "forecast",
    "joint",
    "predicted",
    "protein",
    "sides",
    "together",
    "window_map",
]
