"""Family files and stores: what is read from them, and the one line that says what is wrong with them."""

import ast
import os
import sqlite3
import subprocess
import sys
from pathlib import Path

import ink_family
import numpy as np
import pytest
from command_line import PROBLEM, cnr, spoiled
from demo_names import FOLDER
from family_runs import FAMILY, ROOT, content, run, write_family
from pydantic import ValidationError

from codesign.errors import CodesignError, ProblemError
from codesign.family import demo_families, load_family
from codesign.family.schema import FamilySpec
from codesign.family.sealed import Sealer, decides, program
from codesign.family.store import Store

DEMOS = FOLDER / "families"

SPECTRA = """\
# exported by a spectrometer
wavelength_nm,dye-a.1,dye-a.2,dye-b
380,10,12,40
700,10,12,40
1100,10,12,40
"""


def written(folder: Path, rows: str = "", family: str = FAMILY, header: str = "variant,limits.rig_heat_w") -> Path:
    """A family on files; ``rows`` below the header."""
    (folder / "caps.csv").write_text(f"{header}\n{rows}", encoding="utf-8")
    (folder / "caps-base.toml").write_text(PROBLEM, encoding="utf-8")
    (folder / "spectra.csv").write_text(SPECTRA, encoding="utf-8")
    path = folder / "caps.toml"
    path.write_text(family, encoding="utf-8")
    return path


def with_spectra(folder: Path, rows: str, unit: str = "percent", **keywords: str) -> Path:
    extra = f'spectra = [{{ file = "spectra.csv", unit = "{unit}" }}]\n'
    return written(folder, rows, FAMILY + extra, **keywords)


def mistake(path: Path) -> str:
    """The one line with which a family as a whole is refused."""
    with pytest.raises(CodesignError) as error:
        load_family(path)
    return str(error.value)


def row_mistake(path: Path, name: str) -> str:
    """The one line with which a variant is refused."""
    with pytest.raises(CodesignError) as error:
        load_family(path).problem(name)
    return str(error.value)


# --- what is read ------------------------------------------------------------------------------------------------


def test_cells_are_fields_of_the_problem_and_empty_ones_leave_the_base(tmp_path):
    path = written(
        tmp_path,
        "a,3.5,\"['cap-red', 'cap-yellow']\",none\n# a comment\n\n\"b, second\",,cap-red,2\n",
        header="variant,limits.rig_heat_w,scene.target,required_cnr",
    )
    family = load_family(path)
    assert family.names == ("a", "b, second")
    first, second = (family.problem(name) for name in family.names)
    assert first.spec.limits.rig_heat_w == 3.5
    assert [surface.id for surface in first.targets] == ["cap-red", "cap-yellow"]
    assert first.spec.required_cnr is None  # "none" takes away what the base states
    assert (second.spec.limits.rig_heat_w, second.spec.required_cnr, second.target.id) == (2.0, 2.0, "cap-red")
    assert first.where == "variant 'a'"


def test_columns_may_name_fields_of_parts(tmp_path):
    path = written(tmp_path, "a,123\n", header="variant,led.red-625-a.radiant_flux_mw")
    assert load_family(path).problem("a").channel("red-625-a").led.flux_w() == pytest.approx(0.123)


def test_a_wide_table_of_spectra_gives_surfaces_with_their_samples(tmp_path):
    path = with_spectra(tmp_path, "a,dye-a,dye-b\n", header="variant,scene.target,scene.background")
    problem = load_family(path).problem("a")
    grid = np.array([400.0, 650.0])
    np.testing.assert_allclose(problem.target.mean(grid), 0.11)
    np.testing.assert_allclose(problem.background.mean(grid), 0.4)
    assert len(problem.target.samples.values) == 2
    # Two samples of 0.10 and 0.12: variance 2e-4 with divisor k - 1.
    assert np.sum(problem.target.clutter_factor(grid)[:, 0] ** 2) == pytest.approx(2e-4)


def test_catalogue_and_spectra_are_read_once_for_all_variants(tmp_path, monkeypatch):
    from codesign.family import load

    calls = []
    monkeypatch.setattr(load, "load_catalog", lambda name, real=load.load_catalog: calls.append(name) or real(name))
    path = with_spectra(tmp_path, "a,dye-a\nb,dye-b\nc,dye-a\n", header="variant,scene.target")
    problems = [problem for _, problem in load_family(path).problems()]
    assert calls == ["demo"]
    assert problems[0].target is problems[2].target
    assert problems[0].cameras[0] is problems[1].cameras[0]


def test_the_base_may_be_written_in_the_family_file(tmp_path):
    inline = PROBLEM.replace("\n[[scene.ambient]]", "\n[[problem.scene.ambient]]").replace(
        "\n[scene]", "\n[problem.scene]"
    )
    for section in ("candidates", "optics", "lighting", "motion", "timing", "temperature", "limits", "solver"):
        inline = inline.replace(f"\n[{section}]", f"\n[problem.{section}]")
    head = 'title = "Caps"\nvariants = "caps.csv"\n[problem]\n'
    family = load_family(written(tmp_path, "a,3\n", head + inline))
    assert family.problem("a").spec.limits.rig_heat_w == 3.0
    assert family.base.spec.title == "Blue cap among green caps"


def test_the_base_may_be_a_demo(tmp_path):
    path = written(tmp_path, "a,3\n", FAMILY.replace("caps-base.toml", "yellow-stain"))
    assert load_family(path).problem("a").target.id == "cloth-stain-yellow"


# --- what is wrong -----------------------------------------------------------------------------------------------

ROWS = {
    "a,-1": "caps.csv:2: variant 'a': limits.rig_heat_w is -1, must be > 0; mean heat of all LEDs [W]",
    "a,much": "caps.csv:2: variant 'a': limits.rig_heat_w is 'much', must be a number; mean heat of all LEDs [W]",
    "a,1,5": "caps.csv:2: variant 'a' has 3 cells, must have 2; decimal commas? write decimal points",
    "a": "caps.csv:2: variant 'a' has 1 cells, must have 2; fill the row",
    'a,"1': "caps.csv:2: variant 'a' is no row of comma-separated cells, unexpected end of data; check its quotes",
    "a,nan": "caps.csv:2: variant 'a': limits.rig_heat_w is nan, must be finite; mean heat of all LEDs [W]",
}


@pytest.mark.parametrize("row", ROWS)
def test_a_wrong_row_is_a_wrong_variant(tmp_path, row):
    path = written(tmp_path, f"{row}\nz,2\n")
    assert row_mistake(path, "a") == ROWS[row]
    assert load_family(path).problem("z").spec.limits.rig_heat_w == 2.0


def test_a_row_without_a_name_is_called_by_its_line(tmp_path):
    path = written(tmp_path, "\n,2\n")
    assert row_mistake(path, "row 3") == "caps.csv:3: variant 'row 3' variant is empty; name each variant"


def test_a_curve_that_cannot_be_is_a_mistake_of_the_variants_that_use_it(tmp_path):
    path = with_spectra(tmp_path, "a,dye-a\nb,dye-b\n", header="variant,scene.target")
    (tmp_path / "spectra.csv").write_text(SPECTRA.replace("700,10,12,40", "700,10,12,-40"))
    family = load_family(path)
    assert family.problem("a").target.id == "dye-a"
    assert row_mistake(path, "b") == (
        "caps.csv:3: variant 'b': spectra.csv:4: dye-b is -40, must be >= 0; "
        "subtract the dark reading or clip measured noise"
    )


HEADERS = {
    "variant,limits.heat_w": "column limits.heat_w: limits has no field 'heat_w'; did you mean 'rig_heat_w'?",
    "variant,limits": "column limits: is a whole section; name a field in it",
    "variant,rig_heat_w": "column rig_heat_w: the problem has no field 'rig_heat_w'; did you mean 'limits.rig_heat_w'?",
    "variant,led.red-625.price": "column led.red-625.price: no led 'red-625', did you mean 'red-625-b'?",
    "variant,catalog": "column 'catalog': all variants choose from the parts of the base problem",
    "variant,,limits.supply_w": "column 2 has no name; write a field, or remove it",
    "variant,limits.supply_w,limits.supply_w": "column 'limits.supply_w' appears twice; remove one",
    "name,limits.supply_w": "no column 'variant' with the names of the variants, known: limits.supply_w, name",
    "variant;limits.supply_w": "header 'variant;limits.supply_w' is separated by semicolons; save with commas",
}


@pytest.mark.parametrize("header", HEADERS)
def test_a_wrong_column_concerns_all(tmp_path, header):
    text = mistake(written(tmp_path, "a,1\n", header=header))
    assert text.startswith(f"caps.toml: caps.csv:1: {HEADERS[header]}")


def test_a_table_as_a_whole_can_be_wrong(tmp_path):
    path = written(tmp_path, "a,1\nb,2\na,3\n")
    assert mistake(path) == "caps.toml: caps.csv: variant 'a' is in lines 2 and 4; names must differ"
    (tmp_path / "caps.csv").write_text("# nothing\n")
    assert mistake(path) == "caps.toml: caps.csv: file is empty, must have a header 'variant,<field>' and rows"
    (tmp_path / "caps.csv").write_text("variant,limits.supply_w\n")
    assert mistake(path) == "caps.toml: caps.csv: no rows below the header; write one per variant"
    (tmp_path / "caps.csv").write_bytes(b"variant\n\xff\n")
    assert "caps.csv: byte 8 is not UTF-8 text" in mistake(path)
    (tmp_path / "caps.csv").unlink()
    assert mistake(path) == (
        "caps.toml: variants: 'caps.csv' cannot be read, No such file or directory; paths are relative to this file"
    )


FAMILIES = {
    'base = "caps-base.toml"': ("", "base is missing; name a problem file or a demo, or write it under [problem]"),
    'title = "Caps on a line"': ('title = ""', "title is '', must not be empty; one line"),
    'variants = "caps.csv"': ('variant = "caps.csv"', "unknown key 'variant', did you mean 'variants'?"),
}


@pytest.mark.parametrize("old", FAMILIES)
def test_a_wrong_family_file(tmp_path, old):
    new, text = FAMILIES[old]
    assert mistake(written(tmp_path, "a,1\n", spoiled(FAMILY, old, new))) == f"caps.toml: {text}"


def test_a_base_that_is_not_there_or_wrong(tmp_path):
    path = written(tmp_path, "a,1\n", FAMILY.replace("caps-base.toml", "cap-base.toml"))
    assert mistake(path) == (
        "caps.toml: base is 'cap-base.toml', no such file in the folder of this one, nor a demo problem; "
        "'cnr demos' lists these"
    )
    path = written(tmp_path, "a,1\n")
    (tmp_path / "caps-base.toml").write_text(spoiled(PROBLEM, 'target = "cap-blue"', 'target = "cap-bleu"'))
    assert mistake(path).startswith("caps-base.toml: scene.target is 'cap-bleu', no such surface")
    path.write_text(FAMILY + "problem = {}\n")
    assert mistake(path) == "caps.toml: base and [problem] are both given, must be only one of the two"


def test_wrong_spectra(tmp_path):
    path = with_spectra(tmp_path, "a,1\n")
    for old, new, text in (
        ("dye-a.2", "dye-a", "columns 'dye-a' and 'dye-a.1' are both there; name the samples of a surface alike"),
        ("dye-b", "Ink B", "surface 'Ink B': id is 'Ink B', is not allowed; name in lowercase letters"),
        ("dye-b", "cap-red", "surface 'cap-red': id is taken already in"),
        ("380", "nought", "spectra.csv:3: wavelength_nm is 'nought', must be a number"),
    ):
        (tmp_path / "spectra.csv").write_text(spoiled(SPECTRA, old, new))
        assert mistake(path).startswith("caps.toml: spectra: ") and text in mistake(path)
    (tmp_path / "spectra.csv").unlink()
    assert mistake(path).startswith("caps.toml: spectra: spectra.csv: no such file")


def test_an_empty_folder_and_a_base_beside_a_folder(tmp_path):
    path = written(tmp_path, "a,1\n", 'title = "Folder"\nvariants = "problems"\n')
    (tmp_path / "problems").mkdir()
    assert mistake(path) == ("caps.toml: variants: the folder 'problems' holds no .toml file; 'cnr new' writes one")
    path.write_text('title = "Folder"\nvariants = "problems"\nbase = "bruise"\n')
    assert "a folder of whole problem files, which needs no base" in mistake(path)


def test_names_that_are_none(tmp_path):
    assert "did you mean 'labels-200'?" in mistake(Path("labels-2000"))
    assert mistake(tmp_path / "no.toml").endswith(
        "no such file; check the path; 'cnr demos' lists families to copy from"
    )
    with pytest.raises(ProblemError, match="no variant 'x1'; known: a, b"):
        load_family(written(tmp_path, "a,1\nb,2\n")).only(["x1"])


def test_the_schema_of_the_family_file_is_what_is_checked():
    with pytest.raises(ValidationError):
        FamilySpec.model_validate({"title": "x", "variants": "x.csv", "shared": {"goal": "best"}})
    code, out, _ = cnr("schema", "family")
    assert code == 0 and '"SharedRig"' in out


# --- the key of a content ----------------------------------------------------------------------------------------


def keys(path: Path, *names: str) -> list[str]:
    family, sealer = load_family(path), Sealer()
    return [sealer.sealed(family.problem(name))[1] for name in names]


def test_the_key_follows_what_the_result_depends_on(tmp_path):
    path = with_spectra(tmp_path, "a,dye-a\nb,dye-a\nc,dye-b\n", header="variant,scene.target")
    first, same, other = keys(path, "a", "b", "c")
    assert first == same != other
    changes = {
        "spectra.csv": ("700,10,12,40", "700,10,12.01,40"),
        "caps-base.toml": ("sensor_c = 45", "sensor_c = 45.5"),
    }
    for file, (old, new) in changes.items():
        text = (tmp_path / file).read_text()
        (tmp_path / file).write_text(spoiled(text, old, new))
        assert keys(path, "a")[0] != first
        (tmp_path / file).write_text(text)
    for old, new in (('title = "Blue', 'title = "A blue'), ("required_cnr = 3", "required_cnr = 4")):
        (tmp_path / "caps-base.toml").write_text(spoiled(PROBLEM, old, new))
        assert keys(path, "a")[0] == first
    (tmp_path / "caps-base.toml").write_text(PROBLEM)
    (tmp_path / "spectra.csv").write_text(SPECTRA.replace(",40", ",41"))
    assert keys(path, "a")[0] == first  # another surface of the same file
    assert keys(path, "c")[0] != other


def test_the_key_holds_the_version_of_the_program(tmp_path, monkeypatch):
    from codesign.family import sealed

    path = written(tmp_path, "a,1\n")
    before = keys(path, "a")
    assert program().startswith("0.1.0+")
    monkeypatch.setattr(sealed, "program", lambda: "0.2.0+0")
    assert keys(path, "a") != before


def test_the_version_covers_all_code_that_a_worker_runs():
    """Every module that the worker imports, directly or through others, counts; reports and commands do not."""
    package, seen, waiting = ROOT / "codesign", set(), [ROOT / "codesign" / "family" / "worker.py"]
    while waiting:
        path = waiting.pop()
        if path in seen:
            continue
        seen.add(path)
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if isinstance(node, ast.ImportFrom) and (node.module or "").startswith("codesign."):
                stem = ROOT / Path(*node.module.split("."))
                found = [stem.with_suffix(".py"), stem / "__init__.py"]
                found += [stem / f"{alias.name}.py" for alias in node.names]
                waiting += [each for each in found if each.is_file()]
    used = {path.relative_to(package).as_posix() for path in seen}
    assert {"search/walk.py", "solve.py", "study/warm.py", "catalog/led.py"} <= used
    assert {file for file in used if not decides(file)} == set()
    assert not decides("report/text.py") and not decides("cli.py")


def test_a_parcel_needs_no_files(tmp_path):
    import pickle

    from codesign import evaluate
    from codesign.design import Design

    path = with_spectra(tmp_path, "a,dye-a,dye-b\n", header="variant,scene.target,scene.background")
    problem = load_family(path).problem("a")
    parcel = pickle.loads(pickle.dumps(Sealer().sealed(problem)[0]))
    for file in tmp_path.iterdir():
        file.unlink()
    design = Design(camera="mono-5mp", channel="mono", gain_db=0.0, filter="none", f_number=4.0, exposure_us=300.0,
                    drive_ma={"blue-470-a": 400.0})  # fmt: skip
    assert evaluate(parcel, design).cnr == evaluate(problem, design).cnr
    assert set(parcel.catalog.surfaces) == {"dye-a", "dye-b", "cap-white"}


# --- the store ---------------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def small(tmp_path_factory) -> Path:
    return write_family(tmp_path_factory.mktemp("small"), 3)


def refused(family: Path, store: Path, *options: str) -> str:
    """The one line with which the command refuses a store."""
    code, out, err = cnr("family", family, "--store", store, *options)
    assert (code, out, err.count("\n")) == (2, "", 1), err
    return err.removeprefix("cnr: ").removesuffix("\n")


def test_files_that_are_no_store(small, tmp_path):
    text = tmp_path / "notes.txt"
    text.write_text("these are notes, long enough to be told from the head of a database " * 20)
    assert refused(small, text) == f"{text}: is not a store of results; name another file with --store"
    assert refused(small, text, "--fresh") == f"{text}: is not a store of results; name another file with --store"
    other = tmp_path / "other.sqlite"
    connection = sqlite3.connect(other)
    connection.execute("CREATE TABLE songs (name TEXT)")
    connection.close()
    before = other.read_bytes()
    assert refused(small, other, "--fresh") == (
        f"{other}: is a database of something else; name another file with --store"
    )
    assert other.read_bytes() == before
    assert refused(small, tmp_path) == f"{tmp_path}: is a folder; name a file with --store"
    assert "folder 'nowhere' does not exist" in refused(small, Path("nowhere/x.sqlite"))
    if Path("/proc/self").exists():  # a folder in which nothing can be made, for the superuser too
        assert "cannot be opened for writing" in refused(small, Path("/proc/x.sqlite"))


def test_a_store_of_another_layout(small, tmp_path):
    store = tmp_path / "layout.sqlite"
    run(small, store)
    connection = sqlite3.connect(store)
    connection.execute("PRAGMA user_version = 7")
    connection.close()
    assert "layout 7 of another version of codesign, this one writes 1" in refused(small, store)


def test_a_damaged_store(small, tmp_path):
    store = tmp_path / "damaged.sqlite"
    run(small, store)
    good = store.read_bytes()
    page = int.from_bytes(good[16:18], "big")
    store.write_bytes(good[:page] + b"\xff" * page + good[2 * page :])
    assert refused(small, store) == f"{store}: is damaged; move it away, or name another file with --store"
    store.write_bytes(good)
    connection = sqlite3.connect(store)
    connection.execute("UPDATE results SET outcome = '{}' WHERE variant = 'cap-01'")
    connection.commit()
    connection.close()
    assert refused(small, store) == f"{store}: the row of variant 'cap-01' cannot be read; start anew with --fresh"
    assert cnr("family", small, "--store", store, "--fresh").code == 0
    assert len(content(store)) == 3


def test_two_runs_at_once_on_one_store(small, tmp_path):
    store = tmp_path / "shared.sqlite"
    with Store(store) as first:
        assert refused(small, store) == (
            f"{store}: another run is writing to it; wait for that, or name another file with --store"
        )
        assert list(first.rows()) == []
    assert cnr("family", small, "--store", store).code == 0


def test_a_store_that_cannot_be_written_to(small, tmp_path, monkeypatch):
    store = tmp_path / "read-only.sqlite"
    run(small, store)
    real = sqlite3.connect
    monkeypatch.setattr(sqlite3, "connect", lambda path, **options: real(f"file:{path}?mode=ro", uri=True, **options))
    assert cnr("family", small, "--store", store).code == 0  # nothing is missing
    assert "cannot be written to; change its permissions" in refused(small, store, "--gap", "0.002")


def test_a_full_disk_is_one_line_and_what_is_done_stays(small, tmp_path):
    """A limit on the size of files stands in for the disk."""
    store = tmp_path / "full.sqlite"
    family = write_family(tmp_path, 12)
    code = (
        "import resource, sys; resource.setrlimit(resource.RLIMIT_FSIZE, (16384, 16384)); "
        "from codesign.cli import run; sys.argv[0] = 'cnr'; run()"
    )
    command = [sys.executable, "-c", code, "family", str(family), "--processes", "1", "--store", str(store)]
    found = subprocess.run(command, capture_output=True, text=True, env={**os.environ, "PYTHONPATH": str(ROOT)})
    assert (found.returncode, found.stdout, found.stderr.count("\n")) == (2, "", 1), found.stderr
    assert "what is done is kept, the same command goes on from there" in found.stderr
    done = content(store)
    assert 0 < len(done) < 12
    whole = tmp_path / "whole.sqlite"
    run(family, whole)
    assert done.items() <= content(whole).items()
    run(family, store)
    assert content(store) == content(whole)


# --- the demo ----------------------------------------------------------------------------------------------------


def test_the_demo_of_200_inks_is_what_its_generator_writes(tmp_path):
    ink_family.write_family(tmp_path, 200, name="labels-200")
    for file in tmp_path.iterdir():
        assert (DEMOS / file.name).read_bytes() == file.read_bytes(), "run python tests/ink_family.py"


def test_demo_families_are_listed_and_say_that_they_are_invented():
    names = [demo.name for demo in demo_families()]
    assert "labels-200" in names
    assert names == sorted(path.stem for path in DEMOS.glob("*.toml"))
    for demo in demo_families():
        assert "invented" in demo.notes.lower()
    out = cnr("demos").out
    assert all(name in out for name in names)


@pytest.mark.parametrize("name", sorted(path.stem for path in DEMOS.glob("*.toml")))
def test_every_variant_of_a_demo_family_can_be_built(name):
    family = load_family(name)
    wrong = [str(problem) for _, problem in family.problems() if isinstance(problem, CodesignError)]
    assert not wrong
    assert all(surface.invented for surface in family.surfaces.values())
