"""Where a wild well leaves the hyperparameters two modes, the averages rest on the heavier one."""

import numpy as np

from muntin.surrogate.fit import fit_surrogate
from muntin.window.coded import coding_of, priors_for, readings_of
from tests.window.planted import study


def test_a_second_mode_is_found(tmp_path):
    # Noise explains the well from where the search begins; a short length scale does so far better.
    made = study(tmp_path / "study", 6, "outlier")
    (response,) = made.definition.responses
    columns, priors = coding_of(made.definition).columns, priors_for(made, response)
    fit = fit_surrogate("gp", readings_of(made, response), response.kind, columns, priors, 1)
    noise = fit.weights @ np.exp(fit.theta[:, fit.names.index("noise_sd")])
    assert fit.ess > 64.0
    assert noise < 0.03
