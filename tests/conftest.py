"""One thread for each test process: several processes of several threads hold each other up.

Screens are as wide as they are by default, whatever COLUMNS is where the tests run. Examples of
properties are the same in each run, and take the time that they take.
"""

import os

from hypothesis import settings

for _name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_name, "1")
os.environ.pop("COLUMNS", None)
settings.register_profile("steady", deadline=None, derandomize=True)
settings.load_profile("steady")
