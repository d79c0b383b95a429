"""One thread for each test process: several processes of several threads hold each other up.

Screens are as wide as they are by default, whatever COLUMNS is where the tests run.
"""

import os

for _name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_name, "1")
os.environ.pop("COLUMNS", None)
