"""Dask partitions and one process give the same effects, with rows of one model together wherever they stood."""

from __future__ import annotations

import pytest

from tests.evidence.partitions import cells, differing, partitioned, single

pytest.importorskip("distributed", reason="the extra dask is not installed")


@pytest.mark.filterwarnings("ignore")  # what a cluster says of ports and semaphores is not ours
def test_two_worker_processes_give_what_one_process_gives() -> None:
    frame = cells(1_200, kinds=8)
    alone = single(frame)
    assert (alone.loc[frame["analysis"] != "", "status"] == "converted").sum() > 20
    assert differing(alone, partitioned(frame, workers=2)) == {}
