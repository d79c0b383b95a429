"""Markers of proposed conditions: each has the number of its wells where it has several."""

import pandas as pd
from matplotlib.figure import Figure

from muntin.report.markers import mark_proposed


def test_conditions_of_several_wells_have_their_number() -> None:
    axes = Figure().add_subplot()
    table = pd.DataFrame(
        {"ph": [5.0, 6.0, 7.0], "salt": [1.0, 2.0, 3.0], "wells": [1, 2, 3]}
    ).assign(bridging=[False, False, True])
    mark_proposed(axes, table, "ph", "salt")
    told = {text.get_text(): text.xy for text in axes.texts}  # type: ignore[attr-defined]
    assert told == {"×2": (6.0, 2.0), "×3": (7.0, 3.0)}
