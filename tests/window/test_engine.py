"""The choice of the engine, what a failed sampling does to a window, and the draws in files."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

import muntin
from muntin.record.faults import StudyFaults
from muntin.surrogate import nuts
from muntin.surrogate.nuts import Nuts
from tests.stand_in import stand_in
from tests.studies import HCP, PH, RECOVERY, SALT, read, read_hcp, spread, written


@pytest.fixture
def sampled(monkeypatch):
    """The sampler replaced by draws from the fast engine's nodes."""
    monkeypatch.setattr(nuts, "sample", stand_in)


@pytest.fixture
def study(tmp_path):
    wells = read(spread((PH, SALT), 12))
    wells["hcp"] = read_hcp(wells)["hcp"]
    return written(tmp_path / "study", [wells], responses=[RECOVERY, HCP])


def test_every_response_and_surrogate_is_sampled(study, sampled):
    fast, view = muntin.assess(study), muntin.assess(study, engine="nuts")
    assert (fast.engine, view.engine) == ("fast", "nuts")
    assert fast.inference_data == {}
    found = {r: list(fits) for r, fits in view.inference_data.items()}
    assert found == {"recovery": ["gp", "quadratic"], "hcp": ["gp", "quadratic"]}
    for stack in view.stacks.values():
        assert [fit.sampling.sampler for fit in stack.fits] == ["stand-in", "stand-in"]
    conditions = spread((PH, SALT), 20, 5)
    a, b = fast.at(conditions), view.at(conditions)
    assert list(a) == list(b)
    assert np.abs(a["p_mean"] - b["p_mean"]).mean() < 0.05


def test_a_good_sampling_takes_the_place_of_the_integration(study, sampled):
    view = muntin.assess(study, surrogate="quadratic", engine="nuts")
    names = [c.name for c in view.checks()]
    assert names.count("sampling") == 2
    assert "integration" not in names
    fast = muntin.assess(study, surrogate="quadratic")
    assert "sampling" not in [c.name for c in fast.checks()]


def test_a_failed_sampling_withdraws_the_window(study, sampled, monkeypatch):
    good = nuts.resampled

    def torn(fit, seed, settings):
        fit = good(fit, seed, settings)
        k = np.where(np.arange(12) < 3, 0.8, 0.1)
        return replace(fit, sampling=replace(fit.sampling, divergent=0.02, pareto_k=k))

    monkeypatch.setattr("muntin.surrogate.fit.resampled", torn)
    view = muntin.assess(study, surrogate="quadratic", engine="nuts")
    failed = [c for c in view.checks() if c.name == "sampling" and not c.passed]
    assert [c.response for c in failed] == ["recovery", "hcp"]
    sentence = (
        "Recovery: for the quadratic 4 chains of 1000 draws cannot be relied on: 2 % of the draws "
        "diverged; predictions from the others are uncertain for 3 of 12 readings."
    )
    assert failed[0].sentence == sentence
    assert sentence in view.window().unsupported


def test_settings_are_the_engines(study, sampled):
    view = muntin.assess(study, surrogate="gp", engine=Nuts(draws=150, nodes=100))
    fit = view.stacks["recovery"].fits[0]
    assert (view.engine, fit.sampling.draws, len(fit.surface.weights)) == ("nuts", 150, 100)


def test_draws_are_saved_as_netcdf(study, sampled, tmp_path):
    from muntin.surrogate.quiet import arviz

    view = muntin.assess(study, surrogate="gp", engine="nuts")
    paths = view.save_draws(tmp_path / "draws")
    assert [p.name for p in paths] == ["recovery-gp.nc", "hcp-gp.nc"]
    assert sorted(p.name for p in (tmp_path / "draws").iterdir()) == ["hcp-gp.nc", "recovery-gp.nc"]
    data = arviz().from_netcdf(str(paths[1]), engine="h5netcdf")
    hcp = study.readings("hcp")["y"].to_numpy(dtype=float)
    assert data.observed_data["reading"].to_numpy() == pytest.approx(np.log(hcp))
    latent = view.inference_data["hcp"]["gp"].posterior["latent"].to_numpy()
    assert np.array_equal(data.posterior["latent"].to_numpy(), latent)


def test_without_draws_nothing_is_saved(study, tmp_path):
    with pytest.raises(StudyFaults, match="gets no draws: only the engine nuts makes them"):
        muntin.assess(study).save_draws(tmp_path / "draws")
    assert not (tmp_path / "draws").exists()


def test_before_any_reading_there_is_nothing_to_sample(tmp_path):
    view = muntin.assess(written(tmp_path / "bare"), engine="nuts")
    assert view.fresh
    assert view.inference_data == {}
    assert isinstance(view.at(spread((PH, SALT), 4)), pd.DataFrame)
