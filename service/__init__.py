"""Steady potential fields in rectangular bodies, with error bounds, over HTTP."""

import os

__version__ = "0.1.0"

# numpy and scipy each carry a linear algebra library that starts one thread a processor and reads these names
# once, when it is loaded. Our matrices are small and many are in work at the same time: with the default the
# threads of one request wait for those of the others, and small solves ran forty times slower on two
# processors. A value given from outside stands.
for _name in (
    "OPENBLAS_NUM_THREADS",
    "OMP_NUM_THREADS",
    "MKL_NUM_THREADS",
    "BLIS_NUM_THREADS",
    "VECLIB_MAXIMUM_THREADS",
):
    os.environ.setdefault(_name, "1")
