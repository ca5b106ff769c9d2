"""What all tests share: one thread for linear algebra, a cache of their own, profiles."""

import os
import tempfile

# Before numpy is imported: products here are small, and threads that wait for
# each other take ten times as long as the product.
for variable in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(variable, "1")
# What the transform planner learns in tests stays out of the user's home.
os.environ.setdefault("WAVEPACK_CACHE", tempfile.mkdtemp(prefix="wavepack-tests-"))

from hypothesis import settings  # noqa: E402 - the lines above come first

settings.register_profile("desk", deadline=None)
settings.register_profile("ci", deadline=None, derandomize=True)
settings.load_profile("ci" if os.environ.get("CI") else "desk")
