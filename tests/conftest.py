"""Fixtures that several modules take."""

import pytest


@pytest.fixture(scope="session")
def scheduler():
    """Address of a Dask scheduler with two workers, processes of their own that a nanny begins again."""
    distributed = pytest.importorskip("distributed")
    with distributed.LocalCluster(
        n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None
    ) as cluster:
        yield cluster.scheduler_address
