"""The walk by the workers of a cluster: the same digits as on one machine."""

import numpy as np
import pytest
from distributed import Client, LocalCluster

from earthwork.errors import EarthworkError
from earthwork.quantities.engine import walk
from tests.quantities.conftest import stack_of
from tests.quantities.test_engine import hills, pick


@pytest.fixture(scope="module")
def client():
    with (
        LocalCluster(n_workers=2, threads_per_worker=1, processes=False, dashboard_address=None) as cluster,
        Client(cluster) as client,
    ):
        yield client


def test_same_digits_as_on_one_machine(count, client):
    ground, level = hills(300, 200, holes=0.02), np.zeros((300, 200))
    here = pick(count(ground, level, threads=1, band_rows=16, tile_cells=900))
    there = pick(count(ground, level, client=client, band_rows=16, tile_cells=900))
    assert there.tobytes() == here.tobytes()


def test_progress_counts_every_band(client):
    told = []

    class Nothing:
        def empty(self):
            return self

        def add(self, tile):
            pass

        def merge(self, other):
            pass

    ground = hills(100, 20)
    walk(stack_of(ground, ground), [Nothing()], client=client, band_rows=10, progress=lambda *p: told.append(p))
    assert told[-1] == (10, 10)


def test_tally_that_writes_a_file_is_refused(client):
    class Writer:
        portable = False

        def empty(self):
            return self

    with pytest.raises(EarthworkError, match="Writer writes a file"):
        walk(stack_of(hills(9, 9), hills(9, 9)), [Writer()], client=client)
