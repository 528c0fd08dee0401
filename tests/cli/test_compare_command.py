"""``tapband compare`` on the starter campaign: what it prints, writes and refuses."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest

from tapband.cli import main
from tapband.face import Results

COLUMNS = [
    "a",
    "b",
    "coefficient",
    "difference",
    "u",
    "U",
    "k",
    "low",
    "high",
    "u_if_independent",
    "significant",
]


@pytest.fixture(scope="module")
def started(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("compare") / "demo"
    assert main(["start", str(folder), "--quiet"]) == 0
    return folder / "campaign.toml"


@pytest.mark.parametrize("sides", [("R1/P03", "R2/P08"), ("R1", "R2"), ("clean", "tripped")])
def test_points_runs_and_configs_are_compared_in_80_columns(
    started: Path, sides: tuple[str, str], capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["compare", str(started), *sides]) == 0
    shown = capsys.readouterr().out
    assert max(map(len, shown.splitlines())) <= 80
    assert "95 % intervals; * is significant" in shown
    assert "called independent, the interval of" in shown


def test_the_table_of_differences_is_written_with_its_columns(
    started: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "differences"
    assert main(["compare", str(started), "R1/P03", "R2/P08", "--out", str(out), "--quiet"]) == 0
    assert capsys.readouterr().out == ""
    table = pd.read_csv(out / "differences.csv")
    assert list(table.columns[: len(COLUMNS)]) == COLUMNS
    assert set(table["significant"]) <= {"yes", "no"}
    again = Results.read(out).tables["differences"]
    for column in ("difference", "u", "low", "mc_high"):  # shortest digits give each number back
        assert table[column].tolist() == again[column].tolist()


def test_a_folder_of_other_work_is_refused_before_anything_is_computed(
    started: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (tmp_path / "mine.txt").write_text("kept")
    assert main(["compare", str(started), "R1", "R2", "--out", str(tmp_path)]) == 2
    assert "an existing folder is replaced only if tapband wrote it" in capsys.readouterr().err
    assert (tmp_path / "mine.txt").read_text() == "kept"


def test_results_of_reduce_are_not_replaced_by_differences(
    started: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    out = tmp_path / "reduced"
    assert main(["reduce", str(started), "--out", str(out), "--trials", "300", "--quiet"]) == 0
    assert main(["compare", str(started), "R1", "R2", "--out", str(out)]) == 2
    assert capsys.readouterr().err == (
        f"{out}: must not hold results of another command, which differences would replace; "
        "got those of reduce; choose another --out\n"
    )
    assert (out / "coefficients.csv").exists()


def test_a_tolerance_pairs_angles_that_a_smaller_one_leaves_out(
    started: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["compare", str(started), "clean", "tripped", "--within", "0.001 deg"]) == 0
    narrow = capsys.readouterr().out
    assert "are interpolated between those of tripped" in narrow
    assert main(["compare", str(started), "clean", "tripped", "--within", "1 deg"]) == 0
    assert "interpolated" not in capsys.readouterr().out


def test_a_tolerance_without_a_unit_is_one_line(started: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["compare", str(started), "R1", "R2", "--within", "0.1"]) == 2
    assert (
        capsys.readouterr().err
        == 'within: needs a unit; got "0.1"; write the unit that is meant, as in "0.1 deg" or "0.1 rad"\n'
    )
