"""The surrogates as scikit-learn estimators, on plain arrays in raw units.

Scikit-learn is imported here and nowhere else in the surrogates; `import muntin` leaves this
module alone.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, ClassVar, Self

import numpy as np
from numpy.typing import ArrayLike, NDArray
from sklearn.base import BaseEstimator, RegressorMixin
from sklearn.utils import Tags, check_random_state
from sklearn.utils.validation import check_is_fitted, validate_data

from muntin.surrogate.cells import Readings
from muntin.surrogate.coding import Coding, Continuous
from muntin.surrogate.fit import fit_stack
from muntin.surrogate.links import Link, mean_of
from muntin.surrogate.nodes import Surface
from muntin.surrogate.priors import Kind, priors_of

Array = NDArray[np.float64]
Range = tuple[float, float]
_KINDS = ("real", "fraction", "positive")
_STEP = 0.2
_NORMAL = np.arange(-6.0, 6.0 + _STEP / 2, _STEP)


class _Regressor(RegressorMixin, BaseEstimator):  # type: ignore[misc]
    """What the three estimators share.

    After `fit`: typical_, bounds_ (D, 2) and priors_, as used; stack_, the fits with their
    hyperparameter nodes, leave-one-out predictions and shares; surface_, the posterior they make.
    """

    surrogates: ClassVar[tuple[str, ...]]

    def __init__(
        self,
        *,
        kind: Kind = "real",
        typical: Range | None = None,
        bounds: Sequence[Range | None] | None = None,
        priors: Mapping[str, object] | None = None,
        random_state: int | np.random.RandomState | None = 0,
    ) -> None:
        """Parameters, of which only `kind` usually needs a thought.

        kind: "real"; "fraction" (a logit link, readings may fall outside 0 to 1); or "positive"
        (the logarithm is modelled, so noise is relative).
        typical: (low, high) between which readings usually lie, unit of y; the data's range where
        None. It scales the priors; a fraction does not need it.
        bounds: (low, high) a column of X, raw unit, coded to -1 and 1; the data's range where None.
        priors: entries of `muntin.surrogate.priors.Priors` to replace, in latent units over coded
        columns; a log-normal may be given as (median, log sd).
        random_state: an integer gives the same numbers each time.
        """
        self.kind = kind
        self.typical = typical
        self.bounds = bounds
        self.priors = priors
        self.random_state = random_state

    def fit(
        self,
        X: ArrayLike,
        y: ArrayLike,
        sample_sd: ArrayLike | None = None,
        groups: ArrayLike | None = None,
    ) -> Self:
        """Fit to readings y (n,) at conditions X (n, D), both in raw units.

        sample_sd (n,): standard uncertainty of each reading beside the common noise, in the unit
        of y. groups (n,): plate labels; wells of one plate share an error, which multiplies the
        readings of a fraction and moves the latent value of the other kinds. Raises ValueError.
        """
        x, values = validate_data(self, X, y, dtype=float, y_numeric=True)
        values = values.astype(float)
        self.typical_ = _typical(self.kind, self.typical, values)
        self.bounds_ = _bounds(self.bounds, x)
        self.priors_ = priors_of(self.kind, self.typical_).with_overrides(self.priors or {})
        self._coding = Coding(tuple(Continuous(low=a, high=b) for a, b in self.bounds_))
        coded, columns = self._coding.code(list(x.T)), self._coding.columns
        readings = _readings(self.kind, coded, values, sample_sd, groups)
        self.stack_ = fit_stack(
            self.surrogates, readings, self.kind, columns, self.priors_, _seed(self.random_state)
        )
        self.surface_ = self.stack_.surface
        return self

    def predict(self, X: ArrayLike, return_std: bool = False) -> Array | tuple[Array, Array]:
        """Posterior mean (n,) of the process mean at X (n, D), raw units; with return_std also its
        posterior sd (n,), which holds neither the noise of a reading nor a plate's error.
        """
        check_is_fitted(self)
        x = validate_data(self, X, dtype=float, reset=False)
        mean, sd = _process_moments(self.surface_, self._coding.code(list(x.T)))
        return (mean, sd) if return_std else mean

    def __sklearn_tags__(self) -> Tags:
        """Scikit-learn's tags; a positive response takes positive readings only."""
        tags = super().__sklearn_tags__()
        tags.target_tags.positive_only = self.kind == "positive"
        return tags


class ProcessRegressor(_Regressor):
    """Gaussian process: a constant and a Matern-5/2, one length scale a column."""

    surrogates = ("gp",)


class QuadraticRegressor(_Regressor):
    """Full second-order polynomial with independent normal priors of its coefficients."""

    surrogates = ("quadratic",)


class StackedRegressor(_Regressor):
    """Gaussian process and quadratic, stacked by their leave-one-out predictive densities."""

    surrogates = ("gp", "quadratic")


def _readings(
    kind: Kind, coded: Array, y: Array, sample_sd: ArrayLike | None, groups: ArrayLike | None
) -> Readings:
    """The readings on the scale where noise is additive, with the plates' shared error."""
    n = len(y)
    sd = np.zeros(n) if sample_sd is None else _row_values("sample_sd", sample_sd, n, float)
    if not (np.isfinite(sd) & (sd >= 0.0)).all():
        raise ValueError("sample_sd must be finite and not negative")
    if kind == "positive":
        y, sd = np.log(y), sd / y
    shared: tuple[NDArray[np.intp], ...] = ()
    if groups is not None:
        labels = _row_values("groups", groups, n, None)
        shared = (np.unique(labels, return_inverse=True)[1],)
    inside, scale = ((), shared) if kind == "fraction" else (shared, ())
    return Readings(X=coded, y=y, sd=sd, inside=inside, scale=scale)


def _row_values(name: str, values: ArrayLike, n: int, dtype: Any) -> NDArray[Any]:
    out = np.asarray(values, dtype=dtype)
    if out.shape != (n,):
        raise ValueError(f"{name} must have shape ({n},), one entry a row of X, not {out.shape}")
    return out


def _typical(kind: str, given: Range | None, y: Array) -> Range:
    """The typical range, checked; taken from the readings where none is given."""
    if kind not in _KINDS:
        raise ValueError(f"kind {kind!r} is none of {', '.join(_KINDS)}")
    if kind == "positive" and y.min() <= 0.0:
        raise ValueError(f"a positive response needs readings above 0, not {y.min():g}")
    if given is None:
        low, high = float(y.min()), float(y.max())
        if low < high:
            return low, high
        return (low / 2.0, low * 2.0) if kind == "positive" else _widened(low)
    low, high = map(float, given)
    if not (np.isfinite([low, high]).all() and low < high):
        raise ValueError(f"typical must be (low, high) with low < high, not {given!r}")
    if kind == "positive" and low <= 0.0:
        raise ValueError(f"typical must be (low, high) with low < high, above 0, not {given!r}")
    return low, high


def _bounds(given: Sequence[Range | None] | None, X: Array) -> Array:
    """Low and high (D, 2) of every column, checked; the data's range where none is given."""
    every = [None] * X.shape[1] if given is None else list(given)
    if len(every) != X.shape[1]:
        raise ValueError(f"bounds has {len(every)} entries for {X.shape[1]} columns")
    out = []
    for column, pair in zip(X.T, every, strict=True):
        low, high = (column.min(), column.max()) if pair is None else map(float, pair)
        if pair is not None and not (np.isfinite([low, high]).all() and low < high):
            raise ValueError(f"bounds must be (low, high) with low < high, not {pair!r}")
        out.append((low, high) if low < high else _widened(low))
    return np.array(out, dtype=float)


def _widened(middle: float) -> Range:
    half = max(1.0, abs(middle))
    return middle - half, middle + half


def _seed(random_state: int | np.random.RandomState | None) -> int:
    if isinstance(random_state, int | np.integer):
        return int(random_state)
    return int(check_random_state(random_state).randint(2**31 - 1))


def _process_moments(surface: Surface, X: Array) -> tuple[Array, Array]:
    """Posterior mean and sd (n,) of g(f) at coded X (n, D), over all nodes."""
    centre, within = _node_moments(
        surface.link, *surface.moments(X), surface.errors.ceiling[:, None]
    )
    mean = surface.weights @ centre
    variance = surface.weights @ (within + (centre - mean) ** 2)
    return mean, np.sqrt(variance)


def _node_moments(link: Link, mean: Array, variance: Array, ceiling: Array) -> tuple[Array, Array]:
    """Mean and variance (S, n) of g(f), f normal with the given moments (S, n); ceiling (S, 1)."""
    if link == "identity":
        return mean, variance
    if link == "log":
        centre = np.exp(mean + 0.5 * variance)
        return centre, centre**2 * np.expm1(variance)
    sd, first, second = np.sqrt(variance), np.zeros_like(mean), np.zeros_like(mean)
    density = np.exp(-0.5 * _NORMAL**2)
    for z, weight in zip(_NORMAL, density / density.sum(), strict=True):
        g = mean_of(link, mean + z * sd, ceiling)
        first += weight * g
        second += weight * g * g
    return first, np.maximum(second - first**2, 0.0)
