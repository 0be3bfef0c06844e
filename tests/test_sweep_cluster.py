"""A sweep on the workers of a Dask cluster: the same bits as on this machine, whatever happens to a worker."""

from __future__ import annotations

import os
import signal
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from dask import config
from distributed import LocalCluster

from tests.sweep_examples import SWEEP, write
from tests.test_command import command
from tests.test_sweep import Killer, tasks_of
from tolerance.errors import UnfinishedError
from tolerance.report.swept_text import sweep_json
from tolerance.sweeps.cluster import by_cluster
from tolerance.sweeps.sweep import sweep
from tolerance.sweeps.work import Outcome, Task, do
from tolerance.swept import SweptRow


@pytest.fixture(scope="module")
def cluster(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Any]:
    """Two workers of one thread each, on this machine only."""
    with LocalCluster(n_workers=2, threads_per_worker=1, host="127.0.0.1", dashboard_address="127.0.0.1:0",
                      local_directory=str(tmp_path_factory.mktemp("dask"))) as found:
        yield found


def test_the_cluster_gives_the_same_bits_also_when_a_worker_is_killed(cluster: Any, tmp_path: Path) -> None:
    path = write(tmp_path, SWEEP)
    expected = sweep_json(sweep([path], tmp_path / "here", workers=2))
    killed: list[int] = []

    def kill_one(_number: int, _row: SweptRow, _outcome: Outcome) -> None:
        if not killed:
            killed.append(cluster.workers[0].pid)
            os.kill(killed[0], signal.SIGKILL)

    assert sweep_json(sweep([path], tmp_path / "there", scheduler=cluster.scheduler_address)) == expected
    disturbed = sweep([path], tmp_path / "disturbed", scheduler=cluster.scheduler_address, on_row=kill_one)
    assert len(killed) == 1
    assert sweep_json(disturbed) == expected


def test_what_kills_its_worker_or_the_scheduler_is_told(tmp_path: Path) -> None:
    path = write(tmp_path, SWEEP)
    first, *rest = tasks_of(path)
    deadly = Task("deadly", first.scenario, 1, None, Killer(first.program))
    with config.set({"distributed.scheduler.allowed-failures": 0}), LocalCluster(
            n_workers=1, threads_per_worker=1, host="127.0.0.1", dashboard_address="127.0.0.1:0",
            local_directory=str(tmp_path)) as cluster:
        done = {task.key: outcome for task, outcome in by_cluster([deadly], cluster.scheduler_address)}
        assert "worker died each time" in done["deadly"].message
        assert not done["deadly"].lasting
        coming = by_cluster([first, *rest], cluster.scheduler_address)
        task, outcome = next(coming)
        assert outcome.result == do(task).result
        cluster.close()
        with pytest.raises(UnfinishedError, match=r"--scheduler tcp://127\.0\.0\.1:\d+: the scheduler is gone"):
            list(coming)


def test_no_scheduler_is_told(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr("tolerance.sweeps.cluster.SECONDS_TO_ANSWER", 1)
    path = write(tmp_path, SWEEP)
    assert command("sweep", path, "--out", tmp_path / "out", "--scheduler", "tcp://127.0.0.1:9") == 3
    shown = capsys.readouterr().err
    assert "--scheduler tcp://127.0.0.1:9: no scheduler answers there" in shown
    assert "Traceback" not in shown
