"""One thread of linear algebra, as in every run."""

import pytest

from pairmc.running.batch import limit_blas_threads


@pytest.fixture(scope="session", autouse=True)
def _one_blas_thread() -> None:
    limit_blas_threads()
