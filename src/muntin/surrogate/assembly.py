"""Nodes of a model from the Gaussian laws of its whitened variables."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from muntin.surrogate.drawn import DrawnPolynomial, DrawnProcess
from muntin.surrogate.evidence import Model
from muntin.surrogate.nodes import Errors, Nodes, PolynomialNodes, ProcessNodes
from muntin.surrogate.polynomial import Quadratic
from muntin.surrogate.process import GaussianProcess
from muntin.surrogate.skewness import Skew

Array = NDArray[np.float64]
Index = NDArray[np.intp]


def nodes_of(
    model: Model, theta: Array, root: Array, mean: Array, V: Array, skew: Skew | None = None
) -> Nodes:
    """Nodes at log hyperparameters theta (S, H) with the family's root (S, U, R), from the mean
    (S, R) and covariance V (S, R, R) of the whitened variables, and the skew on them.
    """
    layout = model.layout
    errors = Errors(
        layout.noise(theta),
        layout.inside_sd(theta),
        layout.scale_sd(theta),
        layout.ceiling_of(theta),
    )
    own, family = layout.family(theta), model.family
    if isinstance(family, GaussianProcess):
        alpha, Q = family.weights(root, mean, V)
        # f at x loads on the whitened variables by k(x, X) L^-T.
        turned = None if skew is None else skew.under(np.swapaxes(np.linalg.inv(root), 1, 2))
        return ProcessNodes(family, own, model.cells.X, alpha, Q, errors, turned)
    assert isinstance(family, Quadratic)
    if skew is not None:
        sd = family.coefficient_sd(own)
        skew = skew.under(sd[:, :, None] * np.eye(sd.shape[1], root.shape[2]))
    return PolynomialNodes(family, *family.coefficients(own, mean, V), errors, skew)


def drawn_nodes_of(
    model: Model, theta: Array, root: Array, mean: Array, V: Array, node: Index, w: Array
) -> Nodes:
    """Nodes about draws w (N, R) of the family's whitened variables; node (N,), ascending: that of
    each draw among theta (S, H) with the family's root (S, U, R). Each draw has the covariance V
    (S, R, R) of its node, whose mean (S, R) gives the slopes.
    """
    given = nodes_of(model, theta, root, mean, V)
    if isinstance(given, ProcessNodes):
        return DrawnProcess(given, node, w, np.asarray(np.linalg.inv(root), dtype=float), V)
    assert isinstance(given, PolynomialNodes)
    sd = given.family.coefficient_sd(model.layout.family(theta))
    return DrawnPolynomial(given, node, sd[node] * w[:, : sd.shape[1]])
