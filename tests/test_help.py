"""Help reads well: every command in the overview with a whole line, examples on one line and made of real options."""

from __future__ import annotations

import re
import shlex

import pytest
from command_line import cnr

from codesign.cli import app
from codesign.cli_overview import OVERVIEW

COMMANDS = sorted(command.name or command.callback.__name__ for command in app.registered_commands)


def test_overview_names_every_command_with_a_whole_line():
    out = cnr("--help").out
    listed = [line.split()[0] for line in out.partition("Commands:")[2].strip().splitlines()]
    assert sorted(listed) == COMMANDS
    assert set(COMMANDS) <= set(OVERVIEW), "say in cli_overview what the command is for"
    assert listed == [name for name in OVERVIEW if name in COMMANDS]
    assert "..." not in out.partition("Commands:")[2], "a line was cut"
    assert max(map(len, out.splitlines())) <= 80
    assert "contrast-to-noise ratio" in " ".join(out.split()), "CNR is said in words"


@pytest.mark.parametrize("command", COMMANDS)
def test_examples_stand_on_one_line_and_use_options_that_exist(command):
    out = cnr(command, "--help").out
    example = next(line for line in out.splitlines() if "Example: cnr" in line)
    words = shlex.split(example.partition("Example: ")[2])
    assert words[:2] == ["cnr", command]
    options = set(re.findall(r"^  (--[a-z0-9-]+)", out, flags=re.MULTILINE))
    used = {word for word in words if word.startswith("--")}
    assert used <= options
    takes = re.search(r"^Usage: .* \[OPTIONS\]( \{.*)?", out)
    if takes and takes[1]:
        assert len(words) > 2, "the example lacks what the command needs"


@pytest.mark.parametrize("command", COMMANDS)
def test_every_option_is_explained(command):
    options = cnr(command, "--help").out.partition("Options:")[2]
    for name, rest in re.findall(r"^  (--[a-z0-9-]+)(.*)$", options, flags=re.MULTILINE):
        words = rest.strip().split("  ", 1)
        following = options.partition(f"  {name}{rest}")[2].splitlines()[1:2]
        assert len(words) > 1 or rest.startswith("  ") or (following and following[0].startswith("     ")), name


def test_lists_say_what_to_do_next():
    assert "cnr solve" in cnr("demos").out
    assert "cnr parts leds" in cnr("parts").out


def test_one_part_is_shown_as_a_file_states_it():
    out = cnr("parts", "--id", "nir-850-a").out
    assert re.search(r"^   invented +true$", out, flags=re.MULTILINE)
    assert re.search(r"^   peak_nm +852$", out, flags=re.MULTILINE)
    columns = {line.index(line.split()[1]) for line in out.splitlines()[1:5]}
    assert len(columns) == 1, "values stand in one column"
