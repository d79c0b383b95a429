from dataclasses import fields

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.surrogate.priors import LogNormal, priors_of

IN_UNITS = ("process_sd", "curvature_sd", "noise_sd", "scale_error", "inside_error")


def medians(p):
    return {f.name: v.median for f in fields(p) if isinstance(v := getattr(p, f.name), LogNormal)}


@given(shift=st.floats(-100, 100), size=st.floats(0.01, 100))
def test_priors_of_a_real_response_follow_its_unit(shift, size):
    base, other = priors_of("real", (1.0, 5.0)), priors_of("real", (shift + size, shift + 5 * size))
    assert other.mean == pytest.approx(shift + size * base.mean, abs=1e-9)
    assert other.mean_sd == pytest.approx(size * base.mean_sd, rel=1e-9)
    for name, median in medians(base).items():
        factor = size if name in IN_UNITS else 1.0
        assert medians(other)[name] == pytest.approx(factor * median, rel=1e-9)


@given(factor=st.floats(1e-3, 1e3))
def test_a_unit_moves_only_the_level_of_a_positive_response(factor):
    base = priors_of("positive", (0.5, 8.0))
    other = priors_of("positive", (0.5 * factor, 8.0 * factor))
    assert other.mean - base.mean == pytest.approx(np.log(factor), abs=1e-9)
    assert other.mean_sd == pytest.approx(base.mean_sd, rel=1e-9)
    assert medians(other) == pytest.approx(medians(base), rel=1e-9)


def test_a_fraction_needs_no_typical_range():
    assert priors_of("fraction", (0.1, 0.2)) == priors_of("fraction", (5.0, 60.0))


def test_overrides_replace_only_what_they_name():
    base = priors_of("fraction", (0.0, 1.0))
    changed = base.with_overrides(
        {"mean_sd": 1.5, "noise_sd": (0.01, 0.2), "length_scale": LogNormal(1.0, 0.3)}
    )
    assert changed.mean_sd == 1.5
    assert changed.noise_sd == LogNormal(0.01, 0.2)
    assert changed.length_scale == LogNormal(1.0, 0.3)
    same = {"mean_sd": base.mean_sd, "noise_sd": base.noise_sd, "length_scale": base.length_scale}
    assert changed.with_overrides(same) == base


def test_an_unknown_entry_is_refused():
    with pytest.raises(TypeError, match="nois_sd"):
        priors_of("fraction", (0.0, 1.0)).with_overrides({"nois_sd": (0.01, 0.2)})
