"""Every sample study: its scenario is told, it builds, its proof passes, its numbers stand."""

from pathlib import Path

import pandas as pd
import pytest

from convert import build, read

CASES = sorted((Path(__file__).parents[1] / "cases").glob("*/station.yaml"))


@pytest.mark.parametrize("sheet", CASES, ids=lambda path: path.parent.name)
def test_sample_builds_and_is_proven(sheet):
    study = build(read(sheet))
    assert study.passed
    assert study.left_out == []
    expected = pd.read_csv(sheet.parent / "expected.csv", comment="#", dtype={"name": str})
    assert list(study.branches["name"]) == list(expected["name"])
    for column in ("r_pu", "x_pu", "g_pu", "b_pu", "ratio_pu", "shift_deg", "rated_mva"):
        # frozen values, printed to seven digits
        assert study.branches[column].to_numpy() == pytest.approx(
            expected[column].to_numpy(), rel=1e-6, abs=0
        )
    assert list(study.branches["status"]) == list(expected["status"])


@pytest.mark.parametrize("sheet", CASES, ids=lambda path: path.parent.name)
def test_sample_says_that_it_is_invented(sheet):
    assert "nvented" in sheet.read_text(encoding="utf-8").splitlines()[0]
    assert "invented" in (sheet.parent / "README.md").read_text(encoding="utf-8")
