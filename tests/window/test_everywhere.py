"""What holds at many conditions at once, against draws made another way."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy.special import expit

import muntin
from muntin.record.definition import Definition
from muntin.window.assured import assurance_of, assured_span
from muntin.window.boxes import Span, share_of
from muntin.window.coded import code
from muntin.window.everywhere import Everywhere, share_of_wells
from muntin.window.probability import Target
from muntin.window.steps import Steps, grid_of
from tests.studies import HCP, PH, RECOVERY, SALT, changed, read, read_hcp, spread, tables, written

FACTORS = [PH, SALT]
KEPT = [{**PH, "kept_within": 0.3}, {**SALT, "kept_within": "8 %", "set_sd": "3 %"}]
RESPONSES = [RECOVERY, {**HCP, "at_most": 60}]
N = 4000
GRID = pd.DataFrame(
    [(ph, salt) for ph in (6.0, 6.5, 7.0, 7.5) for salt in (200.0, 300.0, 400.0)],
    columns=["ph", "salt"],
)

# Recovery passes here, though at the first four hardly.
NEAR = pd.DataFrame(
    [(6.5, 265.0), (5.5, 420.0), (6.0, 335.0), (7.5, 110.0), (7.0, 300.0)], columns=["ph", "salt"]
)


@pytest.fixture(scope="module")
def view(tmp_path_factory):
    plates = [read_hcp(read(spread(FACTORS, 12, seed), seed), seed + 9) for seed in (1, 2)]
    folder = tmp_path_factory.mktemp("everywhere")
    return muntin.assess(written(folder, plates, responses=RESPONSES), "quadratic")


@pytest.fixture(scope="module")
def single(view):
    responses = [RECOVERY, {k: v for k, v in HCP.items() if k != "at_most"}]
    one = changed(view, responses=responses)
    return replace(one, surfaces={n: replace(s, cloud=None) for n, s in one.surfaces.items()})


def drawn_by_hand(view, X, draws, seed):
    """Nodes (N,) and process means (N, n): a node by its weight, then its coefficients."""
    surface = view.surfaces["recovery"]
    (part,) = surface.parts
    rng = np.random.default_rng(seed)
    node = rng.choice(len(part), draws, p=surface.weights / surface.weights.sum())
    basis = part.family.basis(X)
    coefficients = np.stack([rng.multivariate_normal(part.mean[k], part.V[k]) for k in node])
    f = coefficients @ basis.T + part.family.priors.mean
    return node, f


def test_chance_that_the_mean_passes_everywhere_against_draws_by_hand(single):
    everywhere = Everywhere.drawn(single, NEAR, N, 1)
    ours = (everywhere.margin(NEAR, "mean") >= 0.0).all(axis=1).mean()
    X = code(single.study.definition, NEAR)
    node, f = drawn_by_hand(single, X, N, 7)
    g = single.surfaces["recovery"].errors.ceiling[node][:, None] * expit(f)
    theirs = (g >= 0.8).all(axis=1).mean()
    assert 0.05 < theirs < 0.95
    assert ours == pytest.approx(theirs, abs=4.0 * np.sqrt(0.5 / N))
    # All at once is less likely than the least likely of them alone.
    assert ours < single.at(NEAR)["p_mean"].min() - 0.02


def test_share_of_wells_everywhere_against_wells_by_hand(single):
    everywhere = Everywhere.drawn(single, NEAR, N, 1)
    ours = (everywhere.share(NEAR, "well") >= 0.8).all(axis=1).mean()
    X = code(single.study.definition, NEAR)
    node, f = drawn_by_hand(single, X, 800, 8)
    errors = single.surfaces["recovery"].errors
    rng = np.random.default_rng(9)
    held = []
    for k, row in zip(node, f, strict=True):
        plate = 1.0 + rng.standard_normal((2000, 1)) * np.sqrt((errors.scale[k] ** 2).sum())
        y = plate * errors.ceiling[k] * expit(row) + errors.noise[k] * rng.standard_normal(
            (2000, len(row))
        )
        held.append(((y >= 0.8).mean(axis=0) >= 0.8).all())
    theirs = np.mean(held)
    assert 0.05 < theirs < 0.95
    assert ours == pytest.approx(theirs, abs=4.0 * np.sqrt(0.25 / 800))


@pytest.mark.parametrize("by", ["mean", "well", "kept"])
def test_averages_over_processes_are_the_probabilities(view, by):
    judged = changed(view, factors=KEPT, responses=RESPONSES, study={"judged_by": by})
    everywhere = Everywhere.drawn(judged, GRID, N, 2)
    table = judged.at(GRID)
    if by == "mean":
        ours = (everywhere.margin(GRID) >= 0.0).mean(axis=0)
    else:
        ours = everywhere.share(GRID).mean(axis=0)
    # Given the process the wells of two responses are independent here, which they nearly are.
    np.testing.assert_allclose(ours, table[f"p_{by}"], atol=4.0 * np.sqrt(0.25 / N))


def test_margin_says_whether_the_share_reaches_what_is_required(view):
    everywhere = Everywhere.drawn(view, GRID, 200, 3)
    share, margin = everywhere.share(GRID), everywhere.margin(GRID)
    np.testing.assert_array_equal(margin >= 0.0, share >= 0.9)
    assert 0.02 < (margin >= 0.0).mean() < 0.98


def test_a_target_between_two_limits(single):
    draws = Everywhere.drawn(single, GRID, 300, 4).surfaces["recovery"]
    f = draws.at(code(single.study.definition, GRID))
    none = np.zeros((1, 1))
    low = share_of_wells(draws, f, Target(low=0.6), none)
    high = share_of_wells(draws, f, Target(high=0.85), none)
    both = share_of_wells(draws, f, Target(0.6, 0.85), none)
    np.testing.assert_allclose(both, low + high - 1.0, atol=1e-12)


# The largest part of a box that is sure enough.


def steps(shape):
    made = [
        {"name": n, "low": 0, "high": k - 1, "step": 1} for n, k in zip("abc", shape, strict=False)
    ]
    return Steps.at(Definition.model_validate(tables(factors=made)), {})


def smooth(shape, draws, seed):
    """Processes that hold where a random plane is positive."""
    rng = np.random.default_rng(seed)
    index = grid_of([np.arange(k) for k in shape])
    slopes = rng.normal(size=(draws, len(shape))) * 0.3
    height = 2.0 + rng.normal(size=(draws, 1)) + slopes @ (index - index.mean(axis=0)).T
    return (height >= 0.0).reshape(draws, *shape)


@pytest.mark.parametrize("shape", [(5, 7), (4, 3, 5)])
@pytest.mark.parametrize("asked", [0.6, 0.85])
def test_assured_span_is_the_largest_by_brute_force(shape, asked):
    made = steps(shape)
    for seed in range(4):
        ok = smooth(shape, 203, seed)
        levels = [np.arange(k) for k in shape]
        holding = np.array([k // 2 for k in shape])
        found = assured_span(ok, made, levels, asked, holding)
        best = 0.0
        spans = [
            [(i, j) for i in range(h + 1) for j in range(h, k)]
            for k, h in zip(shape, holding, strict=True)
        ]
        for box in np.ndindex(*[len(s) for s in spans]):
            ends = [s[i] for s, i in zip(spans, box, strict=True)]
            part = ok[(slice(None), *(slice(a, b + 1) for a, b in ends))]
            if assurance_of(part) >= asked:
                span = Span(*(np.array(e) for e in zip(*ends, strict=True)))
                best = max(best, share_of(made, span))
        if not best:
            assert found is None
            continue
        part = ok[
            (slice(None), *(slice(a, b + 1) for a, b in zip(found.low, found.high, strict=True)))
        ]
        assert assurance_of(part) >= asked
        assert share_of(made, found) == pytest.approx(best)


def test_more_assurance_never_leaves_a_larger_span():
    made, levels = steps((6, 6)), [np.arange(6)] * 2
    ok = smooth((6, 6), 500, 11)
    spans = [assured_span(ok, made, levels, asked, np.array([3, 3])) for asked in (0.3, 0.6, 0.9)]
    shares = [0.0 if s is None else share_of(made, s) for s in spans]
    assert shares == sorted(shares, reverse=True)
    assert shares[0] > shares[-1]
    assert assured_span(ok & False, made, levels, 0.1, None) is None
