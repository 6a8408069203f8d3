"""The batch of a family: kept whatever happens, the same wherever it runs."""

import contextlib
import os
import signal
import sqlite3
import subprocess
import sys
import time
from concurrent.futures import Future
from concurrent.futures.process import BrokenProcessPool
from pathlib import Path

import numpy as np
import pytest
from family_runs import ROOT, DeadlyEngine, Server, content, run, write_family

from codesign import solve, solve_family
from codesign.errors import CodesignError
from codesign.family import load_family
from codesign.family.batch import Interrupted, own_rigs
from codesign.family.engine import HereEngine, ProcessEngine, cores, local_engine
from codesign.family.outcome import Outcome
from codesign.family.store import Store

COUNT = 18


@pytest.fixture(scope="module")
def family(tmp_path_factory) -> Path:
    """A family in which one row is wrong and one cannot be met."""
    rows = {"cap_04": "cap-bleu,cap-green,[],100,2,", "cap_09": "cap-blue,cap-green,[],10000000,2,"}
    return write_family(tmp_path_factory.mktemp("family"), COUNT, **rows)


@pytest.fixture(scope="module")
def undisturbed(family):
    """Result and store of a run in this process that nothing disturbs."""
    store = family.with_name("undisturbed.sqlite")
    return run(family, store), content(store)


def outcomes(found) -> dict[str, Outcome]:
    return {entry.name: entry.outcome for entry in found.entries}


def test_each_variant_is_solved_with_proof_as_it_would_be_alone(family, undisturbed):
    found = outcomes(undisturbed[0])
    loaded = load_family(family)
    for name in ("cap-00", "cap-07", "cap-11"):
        alone = solve(loaded.problem(name), alternatives=0)
        own = found[name]
        assert own.proven and own.gap <= 1e-3
        assert own.cnr == pytest.approx(alone.recipe.cnr, rel=1e-3)
        assert max(own.best_cnr, alone.optimum.cnr) <= min(own.bound, alone.certificate.bound) * (1 + 1e-9)


def test_a_bad_variant_stops_no_other_one(undisturbed):
    found, kept = undisturbed
    assert {entry.name: entry.outcome.status for entry in found.failed} == {"cap-04": "bad", "cap-09": "impossible"}
    assert "caps.csv:6: variant 'cap-04': scene.target is 'cap-bleu'" in outcomes(found)["cap-04"].reason
    assert "did you mean 'cap-blue'?" in outcomes(found)["cap-04"].reason
    assert "motion blur" in outcomes(found)["cap-09"].reason
    assert "motion blur" in outcomes(found)["cap-09"].limits
    # Limits in conflict are a result; a row that cannot be read is looked at again.
    assert len(kept) == COUNT - 1


def test_an_outcome_survives_its_text(undisturbed):
    for outcome in outcomes(undisturbed[0]).values():
        again = Outcome.from_text(outcome.text())
        assert again == outcome
        assert list(again.drive_ma) == list(outcome.drive_ma)  # reports list LEDs in this order


def test_nothing_is_done_twice(family, undisturbed, tmp_path):
    store = tmp_path / "again.sqlite"
    loaded = load_family(family)
    with Store(store) as opened:
        own_rigs(loaded.only(loaded.names[:7]), opened)
    first = _timed_rows(store)
    found = run(family, store)
    assert found.run_now == COUNT - 1 - 6  # of the first seven one cannot be read
    assert outcomes(found) == outcomes(undisturbed[0])
    assert content(store) == undisturbed[1]
    assert _timed_rows(store).items() >= first.items()
    assert run(family, store).run_now == 0


def _timed_rows(store: Path) -> dict[str, tuple]:
    """Rows with the time they took and were written at."""
    connection = sqlite3.connect(store)
    rows = {row[0]: row for row in connection.execute("SELECT * FROM results")}
    connection.close()
    return rows


def test_thirty_kills_at_random_moments_lose_nothing(tmp_path):
    """SIGKILL of the whole run, 30 times; what is on disk is always part of the undisturbed result."""
    family = write_family(tmp_path, 8, cap_02="cap-bleu,cap-green,[],100,2,")
    run(family, tmp_path / "undisturbed.sqlite")
    expected = content(tmp_path / "undisturbed.sqlite")
    rng, kills, runs = np.random.default_rng(30), 0, 0
    server = Server(family)
    try:
        took = _duration(server, tmp_path / "duration.sqlite")
        while kills < 30:
            store, ended = tmp_path / f"killed-{runs}.sqlite", False
            while not ended:
                ended = _killed_after(server, store, rng.uniform(0, 0.5 * took))
                kills += not ended
                if store.exists():
                    assert content(store).items() <= expected.items()
            assert content(store) == expected
            runs += 1
    finally:
        server.close()
    assert runs >= 2


def _killed_after(server: Server, store: Path, seconds: float) -> bool:
    """Kill a run at a moment; whether it had ended by then."""
    process = server.start(store)
    time.sleep(seconds)
    with contextlib.suppress(ProcessLookupError):
        os.kill(process, signal.SIGKILL)
    code = server.code()
    assert code in (0, -signal.SIGKILL)
    return code == 0


def _duration(server: Server, store: Path) -> float:
    started = time.perf_counter()
    server.start(store)
    assert server.code() == 0
    return time.perf_counter() - started


def test_results_do_not_depend_on_processes_or_on_workers_that_are_killed(family, undisturbed, tmp_path):
    """One worker is killed from outside, one variant kills every worker it gets."""
    engine = DeadlyEngine(2, speeds={100 + 7 * 13})
    killed: list[int] = []

    def kill_one(done: int, *_: int) -> None:
        if done >= 6 and not killed and engine.pids():
            killed.extend(engine.pids()[:1])
            os.kill(killed[0], signal.SIGKILL)

    store = tmp_path / "processes.sqlite"
    found = run(family, store, engine, progress=kill_one)
    expected = outcomes(undisturbed[0])
    lost = outcomes(found)["cap-13"]
    assert killed and engine.deaths >= 2
    assert lost.status == "bad" and "ended its worker process twice" in lost.reason
    assert {**outcomes(found), "cap-13": expected["cap-13"]} == expected
    # It is no result, so the next run tries again.
    assert {key: text for key, text in undisturbed[1].items() if key[0] != "cap-13"} == content(store)
    assert run(family, store).run_now == 1
    assert content(store) == undisturbed[1]


class DeadEngine(ProcessEngine):
    """Processes that end before they do anything."""

    def submit(self, function, task):
        future = Future()
        future.set_exception(BrokenProcessPool("ended"))
        return future


def test_processes_that_cannot_start_are_told_as_such(family, tmp_path):
    with pytest.raises(CodesignError, match="worker processes end as soon as they start"):
        run(family, tmp_path / "none.sqlite", DeadEngine(2))


def test_an_interrupt_keeps_what_is_done(family, tmp_path, undisturbed):
    store = tmp_path / "interrupted.sqlite"

    def interrupt(done: int, *_: int) -> None:
        if done == 5:
            os.kill(os.getpid(), signal.SIGINT)

    before = signal.getsignal(signal.SIGINT)
    with pytest.raises(Interrupted) as stop:
        run(family, store, progress=interrupt)
    assert signal.getsignal(signal.SIGINT) is before
    assert (stop.value.done, stop.value.total) == (5, COUNT)
    assert len(content(store)) == 4  # one of the five cannot be read
    assert outcomes(run(family, store)) == outcomes(undisturbed[0])


def test_a_killed_command_leaves_no_worker_behind_and_is_taken_up_again(family, undisturbed, tmp_path):
    path = os.pathsep.join(filter(None, (str(ROOT), os.environ.get("PYTHONPATH"))))
    store = tmp_path / "command.sqlite"
    command = subprocess.Popen(
        [sys.executable, "-m", "codesign", "family", str(family), "--processes", "2", "--store", str(store)],
        env={**os.environ, "PYTHONPATH": path},
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
    )
    try:
        workers = _wait_for(lambda: _workers(command.pid) or command.poll() is not None)
    finally:
        command.kill()
        said = command.communicate()[1]
    assert command.returncode == -signal.SIGKILL and workers is not True, said
    _wait_for(lambda: not any(_alive(worker) for worker in workers))
    assert content(store).items() <= undisturbed[1].items()
    assert outcomes(run(family, store)) == outcomes(undisturbed[0])


def _wait_for(condition, seconds: float = 60.0):
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        found = condition()
        if found:
            return found
        time.sleep(0.02)
    raise AssertionError("it never came")


def _workers(parent: int) -> list[int]:
    """Both workers, once they are there."""
    if not Path("/proc/self/stat").exists():
        pytest.skip("needs /proc")
    found = []
    for folder in Path("/proc").glob("[0-9]*"):
        try:
            stat, words = (folder / "stat").read_text(), (folder / "cmdline").read_bytes()
        except OSError:
            continue
        if int(stat.rpartition(")")[2].split()[1]) == parent and b"spawn_main" in words:
            found.append(int(folder.name))
    return found if len(found) == 2 else []


def _alive(process: int) -> bool:
    try:
        return Path(f"/proc/{process}/stat").read_text().rpartition(")")[2].split()[0] != "Z"
    except OSError:
        return False


def test_changed_inputs_are_run_again_and_stale_results_kept_out(family, undisturbed, tmp_path):
    changed = write_family(tmp_path, COUNT)
    store = tmp_path / "changed.sqlite"
    run(changed, store)
    table = (tmp_path / "caps.csv").read_text().replace("cap-05,cap-red", "cap-05,cap-white")
    (tmp_path / "caps.csv").write_text(table)
    before = content(store)
    found = run(changed, store)
    assert found.run_now == 1
    assert len(content(store)) == len(before) + 1
    assert outcomes(found)["cap-05"].readings[0].surface == "cap-white"
    # Back to the old inputs: their results are still there.
    (tmp_path / "caps.csv").write_text(table.replace("cap-05,cap-white", "cap-05,cap-red"))
    again = run(changed, store)
    assert again.run_now == 0
    assert outcomes(again)["cap-05"].readings[0].surface == "cap-red"


def test_a_change_of_the_gap_or_the_base_changes_all(tmp_path):
    family, store = write_family(tmp_path, 3), tmp_path / "base.sqlite"
    assert run(family, store).run_now == 3
    assert run(family, store, gap=2e-3).run_now == 3
    base = tmp_path / "caps-base.toml"
    base.write_text(base.read_text().replace("required_cnr = 3", "required_cnr = 30"))
    found = run(family, store)  # what is asked of a result does not change it
    assert found.run_now == 0 and [entry.met for entry in found.entries] == [False, False, True]
    base.write_text(base.read_text().replace("air_c = 30", "air_c = 31"))
    assert run(family, store).run_now == 3


def test_a_folder_of_problem_files_is_a_family(tmp_path):
    source = write_family(tmp_path, 1)
    folder = tmp_path / "problems"
    folder.mkdir()
    text = (tmp_path / "caps-base.toml").read_text()
    (folder / "a.toml").write_text(text)
    (folder / "b.toml").write_text(text.replace('target = "cap-blue"', 'target = "cap-red"'))
    (folder / "c.toml").write_text(text.replace("[limits]", "[limit]"))
    source.write_text('title = "Folder"\nvariants = "problems"\n')
    found = run(source, tmp_path / "folder.sqlite")
    assert [entry.name for entry in found.entries] == ["a", "b", "c"]
    assert [entry.outcome.status for entry in found.entries] == ["solved", "solved", "bad"]
    assert outcomes(found)["c"].reason == "c.toml: unknown key 'limit', did you mean 'limits'?"
    assert found.entries[0].variant.where == "problems/a.toml"


def test_engines_by_the_number_of_processes():
    assert isinstance(local_engine(1, 1000), HereEngine)
    assert isinstance(local_engine(None, 2), HereEngine)
    assert isinstance(local_engine(3, 2), ProcessEngine)
    assert local_engine(None, 1000).workers == cores()
    for wrong in (0, -1, 1000):
        with pytest.raises(CodesignError, match=f"processes is {wrong}, must be 1 to 256"):
            local_engine(wrong, 10)


def test_a_fault_of_the_program_in_one_variant_is_told_and_not_kept(family, tmp_path, monkeypatch):
    def fail(problem, *_, **__):
        raise ZeroDivisionError("division by zero")

    monkeypatch.setattr("codesign.family.worker.solved", fail)
    store = tmp_path / "fault.sqlite"
    found = run(family, store)
    reasons = {entry.outcome.reason for entry in found.failed if entry.name != "cap-04"}
    assert len(reasons) == 1
    assert "ZeroDivisionError: division by zero; please report it" in reasons.pop()
    assert content(store) == {}


def test_workers_of_another_version_are_refused(family, tmp_path, monkeypatch):
    from codesign.family import batch

    monkeypatch.setattr(batch, "program", lambda: "9.9+other")
    for engine in (HereEngine(), ProcessEngine(1)):
        with pytest.raises(CodesignError, match=r"a worker runs codesign 0\.1\.0\+\w+, this is 9\.9\+other; use the"):
            run(family, tmp_path / "version.sqlite", engine)


def test_one_call_solves_a_family_and_keeps_it_where_asked(family, undisturbed, tmp_path):
    assert solve_family(load_family(family)).entries == undisturbed[0].entries
    store = tmp_path / "one-call.sqlite"
    assert solve_family(str(family), store=store).run_now == COUNT - 1
    assert solve_family(str(family), store=store).run_now == 0
    with pytest.raises(CodesignError, match="processes is 0"):
        solve_family(family, processes=0)
