"""ArviZ on `view.inference_data`: its numbers and plots work on what the engine nuts leaves."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import matplotlib as mpl
import numpy as np
import pytest

import muntin
from muntin.surrogate import nuts
from muntin.surrogate.nuts import Nuts
from muntin.surrogate.quiet import arviz
from muntin.window.assessment import Assessment
from tests.stand_in import stand_in
from tests.studies import PH, RECOVERY, SALT, read, spread, written

mpl.use("agg")
# How ArviZ itself calls matplotlib and pandas; and some of twelve readings always weigh much.
pytestmark = [
    pytest.mark.filterwarnings("ignore:Passing a dict or None as alias_mapping"),
    pytest.mark.filterwarnings("ignore:The inplace keyword in DataFrame.sort_values"),
    pytest.mark.filterwarnings("ignore:Estimated shape parameter of Pareto"),
]


@pytest.fixture(scope="module")
def study(tmp_path_factory: pytest.TempPathFactory) -> muntin.Study:
    wells = read(spread((PH, SALT), 12))
    return written(tmp_path_factory.mktemp("arviz"), [wells], responses=[RECOVERY])


@pytest.fixture(scope="module")
def view(study: muntin.Study) -> Assessment:
    """The sampler replaced by draws from the fast engine's nodes."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(nuts, "sample", stand_in)
        return muntin.assess(study, engine="nuts")


def shown(data: Any, folder: Path) -> None:
    """Everything that a user would ask of the draws."""
    az = arviz()
    summary = az.summary(data, var_names=["noise_sd", "scale_error", "ceiling_gap", "latent"])
    noise = data.posterior["noise_sd"].to_numpy()
    assert summary.loc["noise_sd", "mean"] == pytest.approx(noise.mean(), abs=6e-4)
    assert {"r_hat", "ess_bulk", "ess_tail"} <= set(summary)
    conditions = [name for name in summary.index if name.startswith("latent[")]
    assert len(conditions) == data.posterior["latent"].shape[2]
    assert data.observed_data["reading"].shape == (12,)
    figures = [
        az.plot_trace(data, var_names=["noise_sd", "process_sd"]),
        az.plot_forest(data, var_names=["latent"]),
        az.plot_rank(data, var_names=["noise_sd"]),
        az.plot_pair(data, var_names=["noise_sd", "process_sd"]),
    ]
    for number, axes in enumerate(figures):
        picture = folder / f"{number}.png"
        np.ravel(axes)[0].figure.savefig(picture)
        assert picture.stat().st_size > 2000
    from matplotlib import pyplot

    pyplot.close("all")


def test_arviz_summarises_and_plots_the_draws(view: Assessment, tmp_path: Path) -> None:
    shown(view.inference_data["recovery"]["gp"], tmp_path)


def test_arviz_compares_the_surrogates_by_leave_one_out(view: Assessment) -> None:
    az = arviz()
    data = view.inference_data["recovery"]
    found = az.loo(data["gp"], pointwise=True)
    own = view.stacks["recovery"].fits[0]
    assert own.sampling is not None
    assert np.asarray(found.pareto_k).shape == (12,)
    table = az.compare(dict(data))
    assert set(table.index) == {"gp", "quadratic"}


@pytest.mark.slow
def test_arviz_works_on_draws_of_nuts(study: muntin.Study, tmp_path: Path) -> None:
    view = muntin.assess(study, surrogate="quadratic", engine=Nuts(draws=300))
    shown(view.inference_data["recovery"]["quadratic"], tmp_path)
