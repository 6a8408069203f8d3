"""The command on a terminal: progress, colours, page width, Ctrl-C."""

import io
import os
import re
import signal
import time

import pytest
from command_line import cnr
from demo_names import DEMOS

from codesign import Design, evaluate, load_problem
from codesign.least_cost import LeastCost
from codesign.report.colour import coloured, wanted
from codesign.report.output import shown
from codesign.report.progress import PointProgress, Progress, Status
from codesign.report.text import performance_text, solution_text

pytest.importorskip("pty")
from terminal import Terminal, screen

ESCAPE = re.compile(r"\x1b\[[0-9;]*m")


class Watched(io.StringIO):
    """Says it is a terminal."""

    encoding = "utf-8"

    def isatty(self) -> bool:
        return True


# --- the progress line


def test_search_tells_best_and_bound_and_keeps_the_best_while_runners_up_are_looked_for():
    with Progress(io.StringIO()) as line:
        assert line.line(line.started + 3) == "searching 3 s"
        line(5.0, 7.0)
        assert line.line(line.started + 3) == "searching 3 s: best CNR 5, none above 7"
        line(0.0, 4.0)
        assert line.line(line.started + 4) == "searching 4 s: best CNR 5, looking for runners-up"


def test_study_tells_what_is_left_once_a_guess_is_fair():
    with PointProgress(io.StringIO()) as line:
        line(0, 40)
        assert line.line(line.started + 9) == "solving 9 s: 0 of 40"
        line(10, 40)
        assert line.line(line.started + 0.6) == "solving 1 s: 10 of 40"
        assert line.line(line.started + 20) == "solving 20 s, about 60 s left: 10 of 40"
        assert "about 30 min left" in line.line(line.started + 600)
        line(40, 40)
        assert line.line(line.started + 80) == "solving 80 s: 40 of 40"


def test_next_part_of_the_work_is_guessed_on_its_own():
    with Status("first", io.StringIO()) as line:
        line.step("second", 1, 3)
        begun = line._state[-1]
        assert line.line(begun + 10).endswith("about 20 s left: 1 of 3")
        line.step("second", 2, 3)
        assert line.line(begun + 10).endswith("about 5 s left: 2 of 3")
        line.step("third")
        assert line.line(begun + 10).startswith("third")
        assert "of 3" not in line.line(begun + 10)


def test_line_is_drawn_on_a_terminal_only_and_wiped(monkeypatch):
    monkeypatch.setattr("codesign.report.progress.QUIET_SECONDS", 0.0)
    monkeypatch.setattr("codesign.report.progress.TICK_SECONDS", 0.01)
    monkeypatch.setenv("TERM", "xterm")
    terminal, pipe = Watched(), io.StringIO()
    with Progress(terminal) as line, Progress(pipe):
        line(5.0, 7.0)
        end = time.monotonic() + 10
        while "best CNR 5" not in terminal.getvalue() and time.monotonic() < end:
            time.sleep(0.01)
    assert "best CNR 5" in terminal.getvalue()
    assert screen(terminal.getvalue()) == [""]
    assert pipe.getvalue() == ""
    monkeypatch.setenv("TERM", "dumb")
    assert not Progress(Watched()).watched


WORK = """
import sys, time
from codesign.report import progress
progress.QUIET_SECONDS, progress.TICK_SECONDS = 0.0, 0.01
with progress.Status("a rather long name of what is being done here") as line:
    line.note("x" * 300)
    print(input())
"""


def test_line_is_cut_to_the_width_a_terminal_has_now():
    terminal = Terminal("-c", WORK, columns=70)
    terminal.wait_for("\r[^\r]{68}…\r")
    terminal.resize(40)
    terminal.wait_for("\r[^\r]{38}…\r")
    os.write(terminal._ours, b"done\n")
    assert terminal.finish() == 0
    drawn = [len(piece) for piece in terminal.text.replace("\n", "\r").split("\r")]
    assert max(drawn) == 69
    assert "done" in screen(terminal.text)[-2]


# --- reports on terminals


def test_command_on_a_terminal_shows_the_report_with_colours_as_wide_as_the_page(solved):
    terminal = Terminal("-m", "codesign", "solve", "yellow-stain", columns=64)
    assert terminal.finish() == 0
    report = solution_text(solved("yellow-stain"), 64).splitlines()
    seen = screen(terminal.text, 64)
    differ = [(a, b) for a, b in zip(seen, report, strict=False) if a != b]
    assert all(" s" in a for a, _ in differ)  # how long it took
    assert len(differ) <= 2
    assert ESCAPE.search(terminal.text)


@pytest.mark.parametrize(
    ("environment", "colours"),
    [({"NO_COLOR": "1"}, False), ({"TERM": "dumb"}, False), ({"NO_COLOR": ""}, True)],
)
def test_environment_says_whether_a_terminal_gets_colours(environment, colours):
    terminal = Terminal("-m", "codesign", "demos", **environment)
    assert terminal.finish() == 0
    assert wanted(Watched(), {"TERM": "xterm", **environment}) == colours
    assert "\x1b" not in terminal.text  # no limit, nothing to colour


@pytest.mark.parametrize(
    ("environment", "colours"),
    [({}, False), ({"FORCE_COLOR": "1"}, True), ({"FORCE_COLOR": "0"}, False),
     ({"FORCE_COLOR": "1", "NO_COLOR": "1"}, False)],
)  # fmt: skip
def test_pipe_gets_colours_only_when_forced(environment, colours):
    assert wanted(io.StringIO(), environment) == colours
    terminal = Terminal("-m", "codesign", "solve", "yellow-stain", columns=50, separate=True, **environment)
    assert terminal.finish() == 0
    assert (b"\x1b[" in terminal.out) == colours
    assert max(len(ESCAPE.sub("", line)) for line in terminal.out.decode().splitlines()) <= 80
    assert screen(terminal.text) == [""]  # progress, wiped


@pytest.mark.parametrize("name", DEMOS)
def test_colours_change_no_character_and_never_say_more_than_the_marks(name, solved):
    text = solution_text(solved(name))
    painted = coloured(text)
    assert ESCAPE.sub("", painted) == text
    assert "\x1b[32m" in painted
    assert "\x1b[31m" not in painted
    for line in painted.splitlines():
        assert ("\x1b[33m" in line) == bool(re.match(r" ► .*[█░]$", ESCAPE.sub("", line)))


def test_missed_limits_are_marked_in_words_and_colour():
    problem = load_problem("yellow-stain")
    design = Design(
        camera="mono-5mp", channel="mono", gain_db=0, filter="none", f_number=5.6, exposure_us=40000,
        drive_ma={"violet-405-a": 700},
    )  # fmt: skip
    painted = coloured(performance_text(problem, evaluate(problem, design)))
    assert " \x1b[1;31m!\x1b[0m well, cloth-white" in painted
    assert "\x1b[1;31mNOT MET\x1b[0m" in painted


@pytest.mark.parametrize("name", DEMOS)
@pytest.mark.parametrize("encoding", ["ascii", "cp1252"])
def test_report_fits_the_page_and_keeps_its_columns_in_other_encodings(name, encoding, solved):
    plain = solution_text(solved(name)).splitlines()
    lines = shown("\n".join(plain), encoding).splitlines()
    assert max(map(len, lines)) <= 80
    bars = [(len(a), len(b)) for a, b in zip(plain, lines, strict=True) if a.endswith(("█", "░"))]
    assert bars
    assert all(a == b for a, b in bars)


# --- Ctrl-C

KILLED_WITH_A_BEST = """
import os, signal, sys
from codesign.report import progress
was = progress.Progress.__call__
def call(self, best, bound):
    was(self, best, bound)
    if best > 0 and not call.done:
        call.done = True
        os.kill(os.getpid(), signal.SIGINT)
call.done = False
progress.Progress.__call__ = call
from codesign.cli import run
sys.argv = ["cnr", "solve", "bruise"]
run()
"""


def test_interrupted_search_still_shows_its_best_and_ends_with_130():
    terminal = Terminal("-c", KILLED_WITH_A_BEST, separate=True)
    assert terminal.finish() == 130
    report = terminal.out.decode()
    assert "WHAT TO SET" in report
    assert " stopped     before the gap asked for" in report
    assert screen(terminal.text) == ["cnr: interrupted; this is the best found until then", ""]


def test_interrupt_during_work_in_several_processes_leaves_one_line():
    arguments = ("vary", "yellow-stain", "--sweep", "averaging.frames=1:100:100")
    terminal = Terminal("-m", "codesign", *arguments)
    terminal.wait_for(r"\d+ of 100")
    terminal.interrupt()
    assert terminal.finish() == 130
    assert screen(terminal.text) == ["cnr: interrupted", ""]


def test_error_that_comes_from_an_interrupt_is_no_bug(monkeypatch):
    def broken(name):
        try:
            os.kill(os.getpid(), signal.SIGINT)
            time.sleep(1)
        except KeyboardInterrupt:
            raise ValueError("left half-way") from None

    monkeypatch.setattr("codesign.problem.load_problem", broken)
    outcome = cnr("check", "yellow-stain", "recipe.toml")
    assert (outcome.code, outcome.err) == (130, "cnr: interrupted\n")


def test_error_without_an_interrupt_keeps_its_traceback(monkeypatch):
    def broken(name):
        raise ValueError("a bug")

    monkeypatch.setattr("codesign.problem.load_problem", broken)
    with pytest.raises(ValueError, match="a bug"):
        cnr("check", "yellow-stain", "recipe.toml")


@pytest.mark.parametrize(("value", "bound", "status", "words"), [
    (0.0, 0.0, "proven", "there is no less"),
    (5.0, 0.0, "stopped", "none is proven, stopped before"),
    (5.0, 4.9, "proven", "with 4.9 W or less no recipe does (proven)"),
])  # fmt: skip
def test_least_is_told_with_its_bound(value, bound, status, words, solved):
    solution = solved("yellow-stain")
    cost = LeastCost(
        quantity="heat", unit="W", value=value, bound=bound, required_cnr=4.0, status=status, steps=3, seconds=1.0,
        solution=solution,
    )  # fmt: skip
    text = solution_text(solution, least=cost)
    assert f" least       {value:g} W reaches CNR 4\n" in text
    assert words in text.split("WHAT TO SET")[0]
