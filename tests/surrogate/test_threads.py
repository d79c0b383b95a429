"""Linear algebra is held to one thread from the first fit on, whatever is loaded when."""

import json
import os
import subprocess
import sys

CODE = """
import json
from muntin.surrogate.threads import threads_for
with threads_for(12):
    import scipy.linalg, scipy.optimize, scipy.special
    from threadpoolctl import threadpool_info
    print(json.dumps([p["num_threads"] for p in threadpool_info() if p["user_api"] == "blas"]))
"""


def test_no_library_that_is_loaded_later_takes_more():
    plain = {k: v for k, v in os.environ.items() if not k.endswith("_NUM_THREADS")}
    given = {**plain, "OPENBLAS_NUM_THREADS": "4"}
    done = subprocess.run(
        [sys.executable, "-c", CODE], env=given, capture_output=True, text=True, check=True
    )
    assert {*json.loads(done.stdout)} == {1}
