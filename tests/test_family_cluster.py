"""Families on a cluster: the same to the last digit, and whatever happens to workers or scheduler told in one line."""

import logging
import os
import signal
from pathlib import Path

import pytest
from command_line import cnr
from family_runs import content, run, write_family

from codesign.errors import CodesignError
from codesign.family import cluster
from codesign.family.cluster import ClusterEngine

distributed = pytest.importorskip("distributed")

COUNT = 12


@pytest.fixture(scope="module")
def family(tmp_path_factory) -> Path:
    """A family in which one row is wrong."""
    return write_family(tmp_path_factory.mktemp("family"), COUNT, cap_04="cap-bleu,cap-green,[],100,2,")


@pytest.fixture(scope="module")
def local(family) -> dict:
    """What the store holds after a run in this process."""
    store = family.with_name("local.sqlite")
    run(family, store)
    return content(store)


@pytest.fixture(scope="module")
def workers():
    """A cluster of two worker processes on this machine."""
    logging.getLogger("distributed").setLevel(logging.CRITICAL)
    with distributed.LocalCluster(
        n_workers=2, threads_per_worker=1, processes=True, dashboard_address=":0", silence_logs=logging.CRITICAL
    ) as found:
        yield found


def test_a_cluster_of_two_gives_the_same_and_a_killed_worker_changes_nothing(family, local, workers, tmp_path):
    engine = ClusterEngine(workers.scheduler_address)
    assert engine.workers == 2
    killed: list[int] = []

    def kill_one(done: int, *_: int) -> None:
        if done >= 3 and not killed:
            process = workers.workers[0].process.pid
            killed.append(process)
            os.kill(process, signal.SIGKILL)

    found = run(family, tmp_path / "cluster.sqlite", engine, progress=kill_one)
    assert killed
    assert [entry.name for entry in found.failed] == ["cap-04"]
    assert content(tmp_path / "cluster.sqlite") == local


def test_the_command_runs_on_a_cluster(family, local, workers, tmp_path):
    store = tmp_path / "command.sqlite"
    code, out, err = cnr("family", family, "--scheduler", workers.scheduler_address, "--store", store)
    assert (code, err) == (1, "")
    assert "12, each with the rig best for it: 11 solved, 1 that failed" in out
    assert content(store) == local


def test_a_scheduler_that_cannot_be_reached_is_one_line(family, tmp_path, monkeypatch):
    monkeypatch.setattr(cluster, "PATIENCE_SECONDS", 0.5)
    code, out, err = cnr("family", family, "--scheduler", "tcp://127.0.0.1:9", "--store", tmp_path / "s.sqlite")
    assert (code, out, err.count("\n")) == (2, "", 1)
    assert "--scheduler tcp://127.0.0.1:9: cannot be reached" in err
    assert not (tmp_path / "s.sqlite").exists()
    code, out, err = cnr("family", family, "--scheduler", "no address", "--store", tmp_path / "s.sqlite")
    assert (code, out, err.count("\n")) == (2, "", 1)


def test_without_the_package_the_way_to_get_it_is_told(family, tmp_path, monkeypatch):
    monkeypatch.setitem(__import__("sys").modules, "distributed", None)
    code, out, err = cnr("family", family, "--scheduler", "tcp://127.0.0.1:9", "--store", tmp_path / "s.sqlite")
    assert (code, out) == (2, "")
    assert err == "cnr: --scheduler needs the package distributed; pip install 'codesign[cluster]'\n"


def test_workers_that_cannot_run_the_program_are_told_in_one_line(family, workers, tmp_path, monkeypatch):
    monkeypatch.setattr(cluster, "_sent", lambda: lambda task: __import__("no_such_program"))
    with pytest.raises(
        CodesignError, match=r"its workers cannot run this program \(No module named 'no_such_program'\)"
    ):
        run(family, tmp_path / "none.sqlite", ClusterEngine(workers.scheduler_address))


def test_workers_of_another_version_are_refused(family, workers, tmp_path, monkeypatch):
    from codesign.family import batch

    monkeypatch.setattr(batch, "program", lambda: "9.9+other")
    with pytest.raises(CodesignError, match=r"a worker runs codesign 0\.1\.0\+\w+, this is 9\.9\+other"):
        run(family, tmp_path / "version.sqlite", ClusterEngine(workers.scheduler_address))


def test_a_scheduler_that_goes_away_is_told_in_one_line(family, local, tmp_path):
    store = tmp_path / "gone.sqlite"
    own = distributed.LocalCluster(
        n_workers=1, threads_per_worker=1, processes=False, dashboard_address=":0", silence_logs=logging.CRITICAL
    )
    gone: list[int] = []

    def leave(done: int, *_: int) -> None:
        if done >= 3 and not gone:
            gone.append(done)
            own.close()

    with own, pytest.raises(CodesignError, match="the scheduler is gone; what is done is kept, run the same command"):
        run(family, store, ClusterEngine(own.scheduler_address), progress=leave)
    done = content(store)
    assert 0 < len(done) < len(local) and done.items() <= local.items()


def test_processes_and_scheduler_do_not_go_together(family):
    code, _, err = cnr("family", family, "--scheduler", "tcp://127.0.0.1:9", "--processes", "2")
    assert code == 2
    assert err == "cnr: --processes is for local processes, --scheduler names others; leave one out\n"


def test_a_cluster_without_workers_is_refused():
    with (
        distributed.LocalCluster(
            n_workers=0, processes=False, dashboard_address=":0", silence_logs=logging.CRITICAL
        ) as empty,
        pytest.raises(CodesignError, match=r"no worker has joined it; start one with 'dask worker tcp|inproc"),
    ):
        ClusterEngine(empty.scheduler_address)
