"""One BLAS thread and derandomised property tests, so that every run does the same work."""

import os

for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[name] = "1"

from hypothesis import HealthCheck, settings  # noqa: E402 - after the thread limit

settings.register_profile("repeatable", derandomize=True, deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("repeatable")
