"""Threads of linear algebra during a fit."""

import json
import os
import subprocess
import sys

import pytest
import scipy.linalg  # noqa: F401 - loaded, so that all that is limited here is there
from threadpoolctl import ThreadpoolController, threadpool_limits

from muntin.surrogate.threads import threads_for

CODE = """
import json
from muntin.surrogate.threads import threads_for
with threads_for(12):
    import scipy.linalg, scipy.optimize, scipy.special
    from threadpoolctl import threadpool_info
    print(json.dumps([p["num_threads"] for p in threadpool_info() if p["user_api"] == "blas"]))
"""


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


def test_no_library_that_is_loaded_later_takes_more():
    plain = {k: v for k, v in os.environ.items() if not k.endswith("_NUM_THREADS")}
    given = {**plain, "OPENBLAS_NUM_THREADS": "4"}
    done = subprocess.run(
        [sys.executable, "-c", CODE], env=given, capture_output=True, text=True, check=True
    )
    assert {*json.loads(done.stdout)} == {1}
