"""Series on a Dask cluster give the numbers that this process gives."""

from __future__ import annotations

import warnings
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.rehearsal.played import plain, quick, same

distributed = pytest.importorskip("distributed")


@pytest.fixture(scope="module")
def address() -> Iterator[str]:
    with (
        warnings.catch_warnings(),
        distributed.LocalCluster(
            n_workers=1, threads_per_worker=2, processes=False, dashboard_address=None
        ) as cluster,
    ):
        yield cluster.scheduler_address


def test_a_cluster_changes_nothing(address: str, tmp_path: Path) -> None:
    study = plain(tmp_path / "study")
    told = quick(study, cluster=address, store=tmp_path / "kept")
    same(told.table, quick(study).table)
    assert len([*(tmp_path / "kept").rglob("series-*.json")]) == 3


def test_a_cluster_takes_up_what_was_played_elsewhere(address: str, tmp_path: Path) -> None:
    study = plain(tmp_path / "study")
    quick(study, series=1, store=tmp_path / "kept")
    told = quick(study, cluster=address, store=tmp_path / "kept")
    assert told.taken_up == 1
