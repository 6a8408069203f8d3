"""The demo family of caps is what its generator writes, and looks like caps."""

from pathlib import Path

import cap_family
import numpy as np

DEMOS = Path(__file__).resolve().parents[1] / "problems" / "families"


def test_demo_tables_are_those_of_the_generator(tmp_path):
    cap_family.write_tables(tmp_path)
    for name in ("caps-24.csv", "caps-24-spectra.csv"):
        assert (DEMOS / name).read_bytes() == (tmp_path / name).read_bytes(), "run python tests/cap_family.py"


def test_reflectance_is_physical_and_the_liner_hardly_differs_from_its_cap():
    found = cap_family.samples()
    curves = np.array(list(found.values()))
    assert len(cap_family.CAPS) == 24
    assert 0 < curves.min() < curves.max() < 1
    for name in cap_family.CAPS:
        cap, liner = (np.mean([found[f"{name}-{part}.{k}"] for k in range(1, 6)], axis=0) for part in ("cap", "liner"))
        assert 0 < np.max(np.abs(cap - liner)) < 0.08, name
