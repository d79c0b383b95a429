"""The scikit-learn estimators: manners, units and what they make of groups and sds."""

import subprocess
import sys

import numpy as np
import pytest
from sklearn.base import clone
from sklearn.model_selection import GroupKFold, cross_val_predict
from sklearn.pipeline import make_pipeline
from sklearn.preprocessing import FunctionTransformer
from sklearn.utils.estimator_checks import estimator_checks_generator

from muntin.surrogate.estimators import ProcessRegressor, QuadraticRegressor, StackedRegressor
from muntin.surrogate.links import mean_of

EVERY = pytest.mark.parametrize("kind_of", [ProcessRegressor, QuadraticRegressor, StackedRegressor])

# Needs array-API dispatch switched on by an environment variable, which the estimators do not use.
NOT_OURS = {"check_array_api_input"}
# Fits to 200 rows or ten columns: run on the quadratic, and on the others with `-m slow`.
LONG = {
    "check_regressors_train",
    "check_regressor_data_not_an_array",
    "check_positive_only_tag_during_fit",
    "check_fit_check_is_fitted",
}


def checks():
    for kind_of in (QuadraticRegressor, ProcessRegressor, StackedRegressor):
        quick = kind_of is QuadraticRegressor
        for estimator, check in estimator_checks_generator(kind_of()):
            name = check.func.__name__
            if name in NOT_OURS:
                continue
            marks = () if quick or name not in LONG else (pytest.mark.slow,)
            given = sorted(check.keywords.items())
            label = "-".join([kind_of.__name__, name, *(f"{k}={v}" for k, v in given)])
            yield pytest.param(estimator, check, marks=marks, id=label)


@pytest.mark.parametrize(("estimator", "check"), list(checks()))
def test_scikit_learns_own_checks(estimator, check):
    check(estimator)


def problem(kind, n=18, seed=1):
    """Conditions (n, 2) in raw units (a pH, a salt), readings of a kind, and plate labels."""
    rng = np.random.default_rng(seed)
    X = np.column_stack([rng.uniform(4.5, 7.5, n), rng.uniform(50.0, 400.0, n)])
    f = 1.2 * (X[:, 0] - 6.0) + (X[:, 1] - 220.0) / 150.0
    plates = np.array(["plate-02", "plate-01", "plate-07"])[np.arange(n) % 3]
    y = {
        "real": 10.0 + f + rng.normal(0.0, 0.1, n),
        "fraction": mean_of("logit", f + 1.0) + rng.normal(0.0, 0.03, n),
        "positive": np.exp(f + rng.normal(0.0, 0.08, n)),
    }[kind]
    return X, y, plates


BOUNDS = [(4.5, 7.5), (50.0, 400.0)]
KINDS = pytest.mark.parametrize("kind", ["real", "fraction", "positive"])
TYPICAL = {"real": (7.0, 13.0), "fraction": (0.05, 0.95), "positive": (0.2, 8.0)}


@EVERY
@KINDS
def test_predictions_are_moments_of_the_process_mean(kind_of, kind):
    """Against draws of g(f) from the nodes: 40,000 draws, 5 errors of a mean or an sd allowed."""
    X, y, plates = problem(kind)
    fitted = kind_of(kind=kind, bounds=BOUNDS).fit(X, y, groups=plates)
    new = np.array([[5.0, 120.0], [6.4, 300.0], [7.4, 390.0]])
    mean, sd = fitted.predict(new, return_std=True)
    coded = (2.0 * new - np.sum(BOUNDS, axis=1)) / np.diff(BOUNDS).T
    latent, variance = fitted.surface_.moments(coded)
    rng, n = np.random.default_rng(2), 40_000
    node = rng.choice(len(latent), n, p=fitted.surface_.weights)
    f = latent[node] + np.sqrt(variance[node]) * rng.normal(size=(n, 3))
    g = mean_of(fitted.surface_.link, f, fitted.surface_.errors.ceiling[node][:, None])
    assert (g.mean(0) - mean) / sd == pytest.approx(np.zeros(3), abs=5.0 / n**0.5)
    kurtosis = ((g - g.mean(0)) ** 4).mean(0) / g.var(0) ** 2
    assert (g.std(0) - sd) / sd == pytest.approx(np.zeros(3), abs=2.5 * np.sqrt(kurtosis.max() / n))
    assert np.array_equal(fitted.predict(new), mean)


@KINDS
def test_moments_far_out_where_little_is_known(kind):
    """Mixture of nodes with a wide latent law each, against closed forms or a dense grid."""
    X, y, _ = problem(kind, n=6)
    fitted = QuadraticRegressor(kind=kind, bounds=BOUNDS).fit(X, y)
    new = np.array([[3.0, 20.0], [9.0, 700.0]])
    mean, sd = fitted.predict(new, return_std=True)
    coded = (2.0 * new - np.sum(BOUNDS, axis=1)) / np.diff(BOUNDS).T
    m, v = fitted.surface_.moments(coded)
    assert np.sqrt(v).max() > 0.5
    if kind == "positive":
        first, second = np.exp(m + 0.5 * v), np.exp(2.0 * m + 2.0 * v)
    else:
        z = np.linspace(-9.0, 9.0, 4001)
        density = np.exp(-0.5 * z**2)
        ceiling = fitted.surface_.errors.ceiling[:, None, None]
        g = mean_of(fitted.surface_.link, m[..., None] + np.sqrt(v)[..., None] * z, ceiling)
        first, second = (power @ density / density.sum() for power in (g, g**2))
    w = fitted.surface_.weights
    # 61 points a fifth of an sd apart, where a latent sd is several logits.
    assert mean == pytest.approx(w @ first, rel=1e-4)
    assert sd**2 == pytest.approx(w @ second - (w @ first) ** 2, rel=1e-3)


@EVERY
@KINDS
def test_a_clone_fits_to_the_same_numbers(kind_of, kind):
    X, y, _ = problem(kind)
    model = kind_of(kind=kind, bounds=BOUNDS, typical=TYPICAL[kind], random_state=5)
    copy = clone(model)
    assert copy.get_params() == model.get_params()
    assert np.array_equal(model.fit(X, y).predict(X), copy.fit(X, y).predict(X))


def test_the_seed_decides():
    X, y, _ = problem("real")

    def predictions(state):
        return ProcessRegressor(random_state=state).fit(X, y).predict(X)

    one = predictions(1)
    assert np.array_equal(one, predictions(1))
    assert not np.array_equal(one, predictions(2))
    state = np.random.RandomState
    assert np.array_equal(predictions(state(3)), predictions(state(3)))


@EVERY
def test_predictions_by_cross_validation_leave_plates_out(kind_of):
    X, y, plates = problem("fraction")
    model = kind_of(kind="fraction", bounds=BOUNDS)
    folds = GroupKFold(3)
    predicted = cross_val_predict(model, X, y, cv=folds, groups=plates, params={"groups": plates})
    for train, test in folds.split(X, y, plates):
        alone = clone(model).fit(X[train], y[train], groups=plates[train])
        assert np.array_equal(predicted[test], alone.predict(X[test]))
    assert np.corrcoef(predicted, y)[0, 1] > 0.9


def test_a_pipeline_passes_groups_and_sds_on():
    X, y, plates = problem("real")
    sd = np.full(len(y), 0.05)
    chain = make_pipeline(FunctionTransformer(), QuadraticRegressor())
    chain.fit(X, y, quadraticregressor__groups=plates, quadraticregressor__sample_sd=sd)
    alone = QuadraticRegressor().fit(X, y, groups=plates, sample_sd=sd)
    assert np.array_equal(chain.predict(X), alone.predict(X))
    assert "inside_error[0]" in chain[-1].stack_.fits[0].names


@KINDS
def test_plates_share_an_error_that_suits_the_kind(kind):
    X, y, plates = problem(kind)
    names = QuadraticRegressor(kind=kind).fit(X, y, groups=plates).stack_.fits[0].names
    shared = [name for name in names if "error" in name]
    assert shared == (["scale_error[0]"] if kind == "fraction" else ["inside_error[0]"])
    without = QuadraticRegressor(kind=kind).fit(X, y).stack_.fits[0].names
    assert not [name for name in without if "error" in name]


def test_plate_labels_may_be_anything():
    X, y, plates = problem("real")
    numbers = {"plate-01": 30, "plate-02": 7, "plate-07": 5}
    by_text = QuadraticRegressor().fit(X, y, groups=plates).predict(X)
    by_number = QuadraticRegressor().fit(X, y, groups=[numbers[p] for p in plates]).predict(X)
    assert by_number == pytest.approx(by_text, abs=1e-3)


def test_a_plate_that_reads_high_is_understood():
    """Four plates that read up to 1.5 high or low hide neither slope nor noise."""
    rng = np.random.default_rng(4)
    x = np.tile(np.linspace(-1.0, 1.0, 6), 4)
    plates = np.repeat(np.arange(4), 6)
    y = x + np.array([1.5, -1.5, 1.0, -1.0])[plates] + rng.normal(0.0, 0.05, 24)
    new = np.array([[-0.8], [0.8]])
    aware = QuadraticRegressor().fit(x[:, None], y, groups=plates).predict(new)
    assert aware[1] - aware[0] == pytest.approx(1.6, abs=0.1)
    noise = [
        np.exp(m.stack_.fits[0].weights @ m.stack_.fits[0].theta[:, 0])
        for m in (
            QuadraticRegressor().fit(x[:, None], y, groups=plates),
            QuadraticRegressor().fit(x[:, None], y),
        )
    ]
    # Seen as noise, the plates' shifts have an sd of 1.3; told of the plates, 0.05 is left.
    assert noise[0] < 0.1 < 1.0 < noise[1]


@KINDS
def test_a_reading_with_a_huge_sd_is_as_good_as_none(kind):
    X, y, _ = problem(kind)
    model = QuadraticRegressor(kind=kind, bounds=BOUNDS, typical=TYPICAL[kind])
    spoilt, sd = y.copy(), np.zeros(len(y))
    spoilt[3], sd[3] = 2.0 * y[3], 1e5
    kept = np.arange(len(y)) != 3
    without = model.fit(X[kept], y[kept]).predict(X)
    assert model.fit(X, spoilt, sample_sd=sd).predict(X) == pytest.approx(without, rel=5e-3)


@EVERY
def test_units_of_columns_do_not_matter(kind_of):
    """pH and salt in other units, bounds alike: the coded columns are the same."""
    X, y, _ = problem("fraction")
    moved = X * [1.0, 1e-3] + [2.0, 0.0]
    bounds = [(6.5, 9.5), (0.05, 0.4)]
    base = kind_of(kind="fraction", bounds=BOUNDS).fit(X, y)
    other = kind_of(kind="fraction", bounds=bounds).fit(moved, y)
    assert other.predict(moved) == pytest.approx(base.predict(X), abs=1e-4)


@EVERY
def test_the_unit_of_a_positive_response_does_not_matter(kind_of):
    X, y, _ = problem("positive")
    base = kind_of(kind="positive").fit(X, y, sample_sd=0.1 * y)
    other = kind_of(kind="positive").fit(X, 250.0 * y, sample_sd=25.0 * y)
    for a, b in zip(base.predict(X, True), other.predict(X, True), strict=True):
        assert b == pytest.approx(250.0 * a, rel=5e-3)


def test_ranges_are_the_datas_where_none_are_given():
    X, y, _ = problem("real")
    fitted = QuadraticRegressor(bounds=[None, (0.0, 500.0)]).fit(X, y)
    assert fitted.bounds_.tolist() == [[X[:, 0].min(), X[:, 0].max()], [0.0, 500.0]]
    assert fitted.typical_ == (y.min(), y.max())
    assert QuadraticRegressor(typical=(5, 15)).fit(X, y).typical_ == (5.0, 15.0)


def test_what_does_not_vary_is_given_room():
    X = np.column_stack([np.full(4, 7.0), np.arange(4.0)])
    fitted = QuadraticRegressor().fit(X, np.full(4, 3.0))
    assert fitted.bounds_[0].tolist() == [0.0, 14.0]
    assert fitted.typical_ == (0.0, 6.0)
    assert fitted.predict(X) == pytest.approx(np.full(4, 3.0), abs=0.05)
    positive = QuadraticRegressor(kind="positive").fit(X, np.full(4, 3.0))
    assert positive.typical_ == (1.5, 6.0)


def test_priors_may_be_replaced():
    X, y, _ = problem("real")
    fitted = QuadraticRegressor(priors={"noise_sd": (0.5, 1e-6)}).fit(X, y)
    assert np.exp(fitted.stack_.fits[0].theta[:, 0]) == pytest.approx(0.5, rel=1e-4)


@pytest.mark.parametrize(
    ("parameters", "message"),
    [
        ({"kind": "percent"}, "kind 'percent' is none of real, fraction, positive"),
        ({"typical": (3.0, 3.0)}, "typical must be (low, high) with low < high, not (3.0, 3.0)"),
        ({"typical": (np.nan, 1.0)}, "typical must be (low, high) with low < high, not (nan, 1.0)"),
        (
            {"kind": "positive", "typical": (0.0, 1.0)},
            "typical must be (low, high) with low < high, above 0, not (0.0, 1.0)",
        ),
        ({"bounds": [(0.0, 1.0)]}, "bounds has 1 entries for 2 columns"),
        (
            {"bounds": [(0.0, 1.0), (2.0, 2.0)]},
            "bounds must be (low, high) with low < high, not (2.0, 2.0)",
        ),
    ],
)
def test_faulty_parameters_are_named(parameters, message):
    X, y, _ = problem("positive")
    with pytest.raises(ValueError) as caught:
        ProcessRegressor(**parameters).fit(X, y)
    assert str(caught.value) == message


@pytest.mark.parametrize(
    ("given", "message"),
    [
        (
            {"groups": np.zeros(5)},
            "groups must have shape (18,), one entry a row of X, not (5,)",
        ),
        (
            {"sample_sd": np.zeros((18, 2))},
            "sample_sd must have shape (18,), one entry a row of X, not (18, 2)",
        ),
        ({"sample_sd": np.full(18, -1.0)}, "sample_sd must be finite and not negative"),
        ({"sample_sd": np.full(18, np.nan)}, "sample_sd must be finite and not negative"),
    ],
)
def test_faulty_sds_and_groups_are_named(given, message):
    X, y, _ = problem("real")
    with pytest.raises(ValueError) as caught:
        QuadraticRegressor().fit(X, y, **given)
    assert str(caught.value) == message


def test_a_positive_response_refuses_a_reading_that_is_not():
    X, y, _ = problem("positive")
    y[4] = 0.0
    with pytest.raises(ValueError, match=r"^a positive response needs readings above 0, not 0$"):
        QuadraticRegressor(kind="positive").fit(X, y)


def test_scikit_learn_is_loaded_by_the_estimators_alone():
    code = (
        "import sys, muntin, muntin.surrogate.fit\n"
        "assert 'muntin.surrogate.estimators' not in sys.modules\n"
        "assert 'sklearn' not in sys.modules\n"
        "import muntin.surrogate.estimators\n"
        "assert 'sklearn' in sys.modules\n"
    )
    subprocess.run([sys.executable, "-c", code], check=True)
