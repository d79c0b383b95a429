"""Threads of linear algebra during a fit."""

import pytest
from threadpoolctl import ThreadpoolController, threadpool_limits

from muntin.surrogate.threads import threads_for


def blas_threads():
    every = ThreadpoolController().info()
    return {found["num_threads"] for found in every if found["user_api"] == "blas"}


@pytest.mark.parametrize(("latents", "within"), [(24, {1}), (400, {2})])
def test_small_models_are_fitted_on_one_thread_and_the_others_come_back(latents, within):
    with threadpool_limits(limits=2, user_api="blas"):
        with threads_for(latents):
            assert blas_threads() == within
        assert blas_threads() == {2}


def test_the_threads_come_back_after_an_error():
    with threadpool_limits(limits=2, user_api="blas"):
        with pytest.raises(ZeroDivisionError), threads_for(24):
            raise ZeroDivisionError
        assert blas_threads() == {2}
