"""Files are written whole or not at all; text reaches terminals of any encoding."""

import json
import os
import stat

import numpy as np
import pytest

from codesign.errors import CodesignError
from codesign.report.layout import bullet, columns, cut, labelled, table
from codesign.report.output import as_ascii, csv_text, plain, shown, write_file


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
    ("encoding", "text"),
    [
        ("utf-8", "5 µs ≤ √2"),
        ("ascii", "5 us <= sqrt2"),
        (None, "5 us <= sqrt2"),
        ("no such encoding", "5 us <= sqrt2"),
        ("cp1252", "5 µs <= sqrt2"),
    ],
)
def test_text_is_shown_in_what_the_stream_can_take(encoding, text):
    assert shown("5 µs ≤ √2", encoding) == text


@pytest.mark.parametrize(("text", "ascii"), [("日", "?"), ("Käppchen", "Kappchen"), ("e\u0301", "e")])
def test_letters_lose_their_marks_and_unknown_characters_become_question_marks(text, ascii):
    assert as_ascii(text) == ascii


@pytest.mark.parametrize("encoding", ["ascii", "cp1252", "cp437"])
def test_columns_stay_in_line_where_likenesses_are_wider_or_narrower(encoding):
    rows = [
        ("well, surface", "≤ 25375 e⁻", "99.9 %"),
        ("junction, led", "≤ 135 °C", "7.8 %"),
        ("depth", "≥ 60 mm", "1 %"),
    ]
    lines = [shown(line, encoding) for line in table(("limit", "allowed", "used"), rows, 80)]
    assert len({len(line) for line in lines}) == 1
    assert shown("\n".join(labelled("bound", "≤ 3 µm", 80)), "ascii") == " bound       <= 3 um"


def test_json_keeps_every_character_in_any_encoding():
    table = {"title": "Käppchen 日 💡", "unit": "µs"}
    text = json.dumps(table, ensure_ascii=False)
    for encoding in ("ascii", "cp1252", "utf-8"):
        assert json.loads(shown(text, encoding).encode(encoding)) == table
    assert shown(text, "utf-8") == text


def test_wide_characters_count_two_columns_and_marks_none():
    assert [columns(text) for text in ("ab", "光学", "e\u0301", "💡")] == [2, 4, 1, 2]
    assert cut("光学検査", 5) == "光学…"
    assert columns(cut("光学検査" * 20, 40)) <= 40


@pytest.mark.parametrize("text", ["光学検査 " * 20, "光" * 200, "e\u0301" * 200, "word " * 40])
def test_lines_are_wrapped_by_what_they_show(text):
    for lines, width in ((labelled("title", text, 60), 60), (bullet(text, 60), 60)):
        assert len(lines) > 1
        assert max(map(columns, lines)) <= width
        assert "".join("".join(lines).split())[-5:] == "".join(text.split())[-5:]
    rows = table(("name", "value"), [(text.strip(), "1"), ("b", "2")], 60)
    assert {columns(row) for row in rows} == {max(map(columns, rows))}
    assert columns(rows[0]) <= 60


def test_typed_words_stay_on_one_line_without_control_characters():
    assert plain("a\x1b[31mb\u202ec\nd\te") == "a [31mb c d e"


def test_tables_keep_all_digits_however_arrays_print():
    import pandas as pd

    table = pd.DataFrame({"cnr": [np.float64(1) / 3, None], "name": ["a", "b"]}, dtype=object)
    with np.printoptions(legacy="1.13"):
        assert csv_text(table) == "cnr,name\n0.3333333333333333,a\n,b\n"
