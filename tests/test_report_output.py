"""Files are written whole or not at all; text reaches terminals of any encoding."""

import io
import os
import stat

import pytest

from codesign.errors import CodesignError
from codesign.report.output import Progress, as_ascii, plain, shown, write_file


def test_file_is_replaced_as_a_whole(tmp_path):
    file = tmp_path / "a.txt"
    file.write_text("old")
    file.chmod(0o640)
    write_file(file, "new µ")
    assert file.read_text(encoding="utf-8") == "new µ"
    assert stat.S_IMODE(file.stat().st_mode) == 0o640
    assert os.listdir(tmp_path) == ["a.txt"]


def test_interrupted_write_leaves_the_old_file(tmp_path, monkeypatch):
    file = tmp_path / "a.txt"
    file.write_text("old")

    def broken(*_):
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "replace", broken)
    with pytest.raises(KeyboardInterrupt):
        write_file(file, "new")
    assert file.read_text() == "old"
    assert os.listdir(tmp_path) == ["a.txt"]


def test_new_file_obeys_the_mask_of_the_process(tmp_path):
    previous = os.umask(0o027)
    try:
        write_file(tmp_path / "a.txt", b"x")
    finally:
        os.umask(previous)
    assert stat.S_IMODE((tmp_path / "a.txt").stat().st_mode) == 0o640


def test_link_is_followed(tmp_path):
    (tmp_path / "real.txt").write_text("old")
    (tmp_path / "link.txt").symlink_to("real.txt")
    write_file(tmp_path / "link.txt", "new")
    assert (tmp_path / "link.txt").is_symlink()
    assert (tmp_path / "real.txt").read_text() == "new"


def test_device_is_written_directly():
    write_file(os.devnull, "x")
    assert not os.path.isfile(os.devnull)


@pytest.mark.parametrize(
    ("name", "overwrite", "words"),
    [
        ("nowhere/a.txt", True, "does not exist"),
        (".", True, "is a folder"),
        ("here.txt", False, "--force"),
        ("x" * 300, True, "cannot be written"),
    ],
)
def test_place_that_cannot_be_written_is_refused(name, overwrite, words, tmp_path):
    (tmp_path / "here.txt").write_text("old")
    with pytest.raises(CodesignError, match=words):
        write_file(tmp_path / name, "new", overwrite=overwrite)
    assert (tmp_path / "here.txt").read_text() == "old"


@pytest.mark.parametrize(
    ("encoding", "text"), [("utf-8", "5 µs ≤ √2"), ("ascii", "5 us <= sqrt2"), (None, "5 us <= sqrt2")]
)
def test_text_is_shown_in_what_the_stream_can_take(encoding, text):
    assert shown("5 µs ≤ √2", encoding) == text


def test_unknown_characters_become_question_marks():
    assert as_ascii("日") == "?"


def test_typed_words_stay_on_one_line_without_control_characters():
    assert plain("a\x1b[31mb\u202ec\nd\te") == "a [31mb c d e"


class _Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_progress_shows_on_a_terminal_only_and_wipes_itself(monkeypatch):
    monkeypatch.setattr("codesign.report.output.QUIET_SECONDS", 0.0)
    terminal, pipe = _Terminal(), io.StringIO()
    for stream in (terminal, pipe):
        progress = Progress(stream)
        progress(5.0, 7.0)
        progress.clear()
    assert "best CNR 5" in terminal.getvalue()
    assert terminal.getvalue().endswith(" \r")
    assert pipe.getvalue() == ""


def test_progress_keeps_the_best_while_runners_up_are_looked_for(monkeypatch):
    monkeypatch.setattr("codesign.report.output.QUIET_SECONDS", 0.0)
    terminal = _Terminal()
    progress = Progress(terminal)
    progress(5.0, 7.0)
    progress(0.0, 4.0)
    assert "best CNR 5, none above 7" in terminal.getvalue()
    assert "best CNR 5, looking for runners-up" in terminal.getvalue()
