"""One BLAS thread and derandomised property tests, so that every run does the same work."""

import os

for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[name] = "1"

import pytest  # noqa: E402
from hypothesis import HealthCheck, settings  # noqa: E402 - after the thread limit

settings.register_profile("repeatable", derandomize=True, deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("repeatable")


@pytest.fixture(scope="session")
def small_dossiers(tmp_path_factory):
    """One sound dossier per operating point of the small project; to be copied, not changed."""
    from small_dossier import dossiers  # noqa: PLC0415 - loads the searches, which few tests need

    return dossiers(tmp_path_factory.mktemp("small"))


@pytest.fixture
def damaged(small_dossiers, tmp_path):
    """A function that copies the dossier of an operating point to where it may be damaged."""
    from small_dossier import copied  # noqa: PLC0415

    return lambda point: copied(small_dossiers[point], tmp_path / point)
