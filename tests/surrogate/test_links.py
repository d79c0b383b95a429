import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from muntin.surrogate.links import latent_of, mean_of, slope_of

LINKS = st.sampled_from(["identity", "logit", "log"])


@given(LINKS, st.floats(-8.0, 8.0))
def test_latent_and_mean_undo_each_other(link, f):
    assert latent_of(link, mean_of(link, f)) == pytest.approx(f, abs=1e-9)


@given(LINKS, st.floats(-8.0, 8.0))
def test_the_slope_agrees_with_differences(link, f):
    h = 1e-5
    difference = (mean_of(link, f + h) - mean_of(link, f - h)) / (2.0 * h)
    assert slope_of(link, f) == pytest.approx(float(difference), rel=1e-6, abs=1e-10)


def test_the_means_are_those_named():
    assert mean_of("logit", np.log(4.0)) == pytest.approx(0.8)
    assert mean_of("log", np.log(4.0)) == pytest.approx(4.0)
    assert mean_of("identity", -3.5) == -3.5


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
