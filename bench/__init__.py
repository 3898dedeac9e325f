"""Measured, not assumed: how fast and how right the engine is beside general-purpose solvers, and what packs cost.

One command runs everything and writes RESULTS.md: `python -m bench.run` from the top of a checkout.
"""

import os

# Everything is compared on one core; the linear algebra of SciPy's solvers would otherwise spread small matrices over
# all of them and lose more than it gains. Must stand before numpy is first imported.
for _name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_name, "1")
