"""The command as a process: start-up time, pipes, interrupts, encodings."""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from command_line import PROBLEM

ROOT = Path(__file__).parents[1]
COMMAND = (sys.executable, "-m", "codesign")


def start(*arguments: str, env: dict[str, str] | None = None, **options) -> subprocess.Popen:
    path = os.pathsep.join(filter(None, (str(ROOT), os.environ.get("PYTHONPATH"))))
    return subprocess.Popen(
        (*COMMAND, *arguments),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        env={**os.environ, "PYTHONPATH": path, **(env or {})},
        **options,
    )


def test_help_imports_no_heavy_library():
    code = (
        "import sys\nfrom codesign.cli import app\n"
        "try: app(['--help'])\nexcept SystemExit: pass\n"
        "print(sorted({'numpy', 'scipy', 'pydantic', 'pandas', 'matplotlib', 'cvxpy', 'rich'} & set(sys.modules)))"
    )
    done = subprocess.run((sys.executable, "-c", code), capture_output=True, text=True, cwd=ROOT, check=True)
    assert done.stdout.splitlines()[-1] == "[]"


def test_solve_imports_no_plotting_table_or_modelling_library():
    code = (
        "import sys\nfrom codesign.cli import app\n"
        "try: app(['solve', 'yellow-stain'])\nexcept SystemExit: pass\n"
        "print(sorted({'scipy', 'pandas', 'matplotlib', 'cvxpy', 'rich'} & set(sys.modules)))"
    )
    done = subprocess.run((sys.executable, "-c", code), capture_output=True, text=True, cwd=ROOT, check=True)
    assert done.stdout.splitlines()[-1] == "[]"


@pytest.mark.benchmark
def test_help_takes_less_than_three_tenths_of_a_second():
    assert best_of(3, "--help") < 0.3


@pytest.mark.benchmark
def test_smallest_demo_takes_less_than_one_and_a_half_seconds():
    assert best_of(3, "solve", "yellow-stain") < 1.5


def best_of(times: int, *arguments: str) -> float:
    seconds = []
    for _ in range(times):
        began = time.perf_counter()
        process = start(*arguments)
        process.communicate(timeout=20)
        seconds.append(time.perf_counter() - began)
        assert process.returncode == 0
    return min(seconds)


def test_reader_that_leaves_early_causes_no_noise():
    process = start("schema")
    process.stdout.close()
    error = process.stderr.read()
    process.wait()
    process.stderr.close()
    assert error == b""


def test_interrupt_is_one_line_and_its_own_exit_code(tmp_path):
    fifo = tmp_path / "job.toml"
    os.mkfifo(fifo)  # reading it waits, so the interrupt finds the command at work
    process = start("solve", str(fifo))
    with fifo.open("w") as file:  # opens once the command reads
        process.send_signal(signal.SIGINT)
        out, error = process.communicate(timeout=20)
        assert not file.closed
    assert (process.returncode, out, error) == (130, b"", b"cnr: interrupted\n")


def test_terminal_without_unicode_gets_ascii(tmp_path):
    (tmp_path / "job.toml").write_text(PROBLEM.replace("Blue cap", "Blau-Käppchen 日"), encoding="utf-8")
    process = start("solve", str(tmp_path / "job.toml"), env={"PYTHONIOENCODING": "ascii"})
    out, error = process.communicate(timeout=20)
    assert (process.returncode, error) == (0, b"")
    text = out.decode("ascii")
    assert "Blau-Kappchen ?" in text
    assert " us, LEDs on" in text


def test_error_about_a_name_beyond_ascii_still_shows(tmp_path):
    process = start("solve", str(tmp_path / "日.toml"), env={"PYTHONIOENCODING": "ascii"})
    out, error = process.communicate(timeout=20)
    assert (process.returncode, out) == (2, b"")
    assert error.startswith(b"cnr: ")
    assert error.count(b"\n") == 1
    assert b"Traceback" not in error


@pytest.mark.parametrize(
    ("arguments", "named"), [(("solve",), b"PROBLEM"), (("--foo",), b"--foo"), (("solv",), b"'solve'")]
)
def test_wrong_usage_is_one_line_and_exit_code_two(arguments, named):
    process = start(*arguments)
    _, error = process.communicate(timeout=20)
    assert process.returncode == 2
    assert error.count(b"\n") == 1
    assert named in error
