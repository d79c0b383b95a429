import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.surrogate.links import latent_of, mean_of, slope_of

LINKS = st.sampled_from(["identity", "logit", "log"])
CEILINGS = st.floats(0.5, 1.0)


@given(LINKS, st.floats(-8.0, 8.0), CEILINGS)
def test_latent_and_mean_undo_each_other(link, f, ceiling):
    assert latent_of(link, mean_of(link, f, ceiling), ceiling) == pytest.approx(f, abs=1e-9)


@given(LINKS, st.floats(-8.0, 8.0), CEILINGS)
def test_the_slope_agrees_with_differences(link, f, ceiling):
    h = 1e-5
    difference = (mean_of(link, f + h, ceiling) - mean_of(link, f - h, ceiling)) / (2.0 * h)
    assert slope_of(link, f, ceiling) == pytest.approx(float(difference), rel=1e-6, abs=1e-10)


def test_the_means_are_those_named():
    assert mean_of("logit", np.log(4.0)) == pytest.approx(0.8)
    assert mean_of("log", np.log(4.0)) == pytest.approx(4.0)
    assert mean_of("identity", -3.5) == -3.5


def test_a_ceiling_is_where_a_fraction_levels_off_and_moves_nothing_else():
    assert mean_of("logit", 40.0, 0.9) == pytest.approx(0.9)
    assert mean_of("logit", 0.0, 0.9) == pytest.approx(0.45)
    assert latent_of("logit", 0.9, 0.9) == latent_of("logit", 0.95, 0.9) == np.inf
    for link in ("identity", "log"):
        assert mean_of(link, 1.3, 0.9) == mean_of(link, 1.3)
        assert latent_of(link, 1.3, 0.9) == latent_of(link, 1.3)


@pytest.mark.parametrize(
    ("link", "value", "latent"),
    [
        ("logit", [0.0, -0.2, -np.inf], -np.inf),
        ("logit", [1.0, 1.2, np.inf], np.inf),
        ("log", [0.0, -2.0, -np.inf], -np.inf),
        ("log", [np.inf], np.inf),
        ("identity", [np.inf], np.inf),
    ],
)
def test_values_beyond_the_range_lie_at_infinity(link, value, latent):
    assert (latent_of(link, value) == latent).all()
