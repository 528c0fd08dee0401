"""What is written is what comes back, whole or not at all, and inert whatever the names."""

from __future__ import annotations

import csv
import json
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from pandas.testing import assert_frame_equal

from synthetic_results import Synthetic, synthetic
from tapband.files import read_results
from tapband.files.write import write
from tapband.files.write_columns import ORDER
from tapband.files.write_folder import replacing
from tapband.files.write_text import defused
from tapband.nouns.errors import InputError

HOSTILE = [
    "=1+1", "+cmd|'/c calc'!A1", "-2+3", "@SUM(A1)", "\t=1", "\r=1", "two\r\nlines",
    "<script>alert(1)</script>",
    "</script><img src=x onerror=alert(1)>", "]]>&amp;\"'", "[bold red]x[/]", "x" * 5000,
    "Ωμέγα 翼型 дужка", "🛩️",
    "\u202eright to left", " =lead", "＝1+1", "\x1b[31mred",
]  # fmt: skip


@pytest.fixture(scope="module")
def results() -> Synthetic:
    return synthetic()


@pytest.mark.parametrize(
    ("text", "safe"),
    [
        ("=1+1", "'=1+1"), ("+a", "'+a"), ("-a", "'-a"), ("@a", "'@a"), ("\t=1", "'\t=1"), ("\r=1", "' =1"),
        ("a\nb\r\nc", "a b c"), (" =1", "' =1"), ("＝1", "'＝1"), ("-4", "-4"), ("+2.5e-3", "+2.5e-3"),
        ("-4 deg", "'-4 deg"), ("plain", "plain"), ("'quoted", "'quoted"), ("", ""), ("\x1b[31m", "[31m"),
    ],
)  # fmt: skip
def test_text_a_spreadsheet_would_compute_is_marked_as_text(text: str, safe: str) -> None:
    assert defused(text) == safe


def test_written_tables_come_back_bit_for_bit(results: Synthetic, tmp_path: Path) -> None:
    parts = read_results.read(write(results, tmp_path / "out"))
    assert list(parts.tables) == list(results.tables)
    for name, frame in results.tables.items():
        assert_frame_equal(parts.tables[name], frame, check_exact=True)
    for name, array in results.arrays.items():
        assert np.array_equal(parts.arrays[name], array)
    assert parts.meta == json.loads(json.dumps(results.meta))


def test_infinite_dof_and_missing_dof_are_told_apart_on_reading(tmp_path: Path) -> None:
    frame = pd.DataFrame({"cl_u": [0.1, np.nan, 0.2], "cl_dof": [np.inf, np.nan, 8.0]})
    results = Synthetic(campaign=synthetic().campaign, tables={"coefficients": frame}, meta={})
    back = read_results.read(write(results, tmp_path / "out")).tables["coefficients"]
    assert_frame_equal(back, frame, check_exact=True)
    assert (tmp_path / "out" / "coefficients.csv").read_text() == "cl_u,cl_dof\n0.1,\n,\n0.2,8.0\n"


def test_named_index_and_units_come_back(tmp_path: Path) -> None:
    frame = pd.DataFrame({"point": ["a", "b"], "alpha": [1.0, 2.0]}).set_index("point")
    results = Synthetic(campaign=synthetic().campaign, tables={"coefficients": frame}, meta={})
    back = read_results.read(write(results, tmp_path / "out")).tables["coefficients"]
    assert_frame_equal(back, frame)
    assert back.attrs["units"] == {"point": "", "alpha": "deg"}
    assert (tmp_path / "out" / "coefficients.csv").read_text().startswith("point,alpha\n")


def test_csv_holds_every_digit_and_the_fixed_columns_in_order(results: Synthetic, tmp_path: Path) -> None:
    folder = write(results, tmp_path / "out")
    for name in ("cp", "budget", "correlation"):
        with (folder / f"{name}.csv").open(encoding="utf-8", newline="") as stream:
            rows = list(csv.reader(stream))
        assert tuple(rows[0]) == ORDER[name]
        number = rows[0].index("correlation" if name == "correlation" else "x" if name == "cp" else "share")
        written = np.array([float(row[number]) for row in rows[1:]])
        assert np.array_equal(written, results.tables[name][rows[0][number]])


def test_results_json_is_strict_and_names_its_format(results: Synthetic, tmp_path: Path) -> None:
    def refuse(constant: str) -> None:
        raise AssertionError(constant)

    text = (write(results, tmp_path / "out") / "results.json").read_text(encoding="utf-8")
    content = json.loads(text, parse_constant=refuse)
    assert content["format"] == 1
    assert content["seed"] == 7
    assert content["inputs"] == results.meta["inputs"]
    assert content["tables"]["cp"]["units"]["x"] == "chord"
    assert None in content["tables"]["cp"]["columns"]["cp"]


def test_hostile_names_are_inert_in_every_table(tmp_path: Path) -> None:
    folder = write(synthetic(20, 11, 20, names=HOSTILE), tmp_path / "out", excel=True, parquet=True)
    for file in folder.glob("*.csv"):
        with file.open(encoding="utf-8", newline="") as stream:
            rows = list(csv.reader(stream))
        assert {len(row) for row in rows} == {len(rows[0])}, file
        for cell in (cell for row in rows for cell in row):
            assert defused(cell) == cell
            assert not any(ord(c) < 32 and c != "\t" for c in cell)
    from openpyxl import load_workbook

    book = load_workbook(folder / "results.xlsx")
    kinds = {cell.data_type for sheet in book for row in sheet.iter_rows() for cell in row}
    assert kinds <= {"s", "inlineStr", "n", "b"}  # text, numbers, empty, booleans; "f" would be a formula
    assert "=1+1" in {cell.value for cell in book["cp"]["A"]}


def test_workbook_has_units_widths_and_numbers_as_numbers(results: Synthetic, tmp_path: Path) -> None:
    from openpyxl import load_workbook

    book = load_workbook(write(results, tmp_path / "out", excel=True) / "results.xlsx")
    assert book.sheetnames == ["notes", *results.tables]
    sheet = book["coefficients"]
    row = {cell.value: i for i, cell in enumerate(sheet[1])}
    assert sheet[2][row["alpha"]].value == "[deg]"
    value = results.tables["coefficients"]["cl"][0]
    assert sheet[3][row["cl"]].value == pytest.approx(value, rel=1e-15)  # the format holds 16 digits
    assert sheet.freeze_panes == "B3"
    assert sheet.column_dimensions["A"].width > 5
    assert sheet[1][0].font.bold


def test_parquet_holds_the_numbers_and_their_units(results: Synthetic, tmp_path: Path) -> None:
    import pyarrow.parquet as pq

    table = pq.read_table(write(results, tmp_path / "out", parquet=True) / "cp.parquet")
    assert table.schema.field("x").metadata == {b"unit": b"chord"}
    assert np.array_equal(table["cp_u"].to_numpy(), results.tables["cp"]["cp_u"], equal_nan=True)


def test_arrays_with_any_name_come_back(tmp_path: Path) -> None:
    arrays = {"file": np.arange(3), "../up": np.eye(2), "": np.array(["a", "ü"]), "names": np.zeros(0)}
    results = Synthetic(campaign=synthetic().campaign, tables={}, meta={}, arrays=arrays)
    back = read_results.read(write(results, tmp_path / "out")).arrays
    assert list(back) == list(arrays)
    assert all(np.array_equal(back[name], array) for name, array in arrays.items())


def test_a_folder_of_ours_is_replaced_and_foreign_files_stay(results: Synthetic, tmp_path: Path) -> None:
    folder = write(results, tmp_path / "out", excel=True)
    (folder / "my notes.txt").write_text("mine")
    write(results, folder)
    assert (folder / "my notes.txt").read_text() == "mine"
    assert not (folder / "results.xlsx").exists()
    assert [entry.name for entry in tmp_path.iterdir()] == ["out"]


def test_a_foreign_folder_is_refused_and_left_alone(results: Synthetic, tmp_path: Path) -> None:
    folder = tmp_path / "out"
    folder.mkdir()
    (folder / "results.json").write_text('{"format": 1}')
    with pytest.raises(InputError) as caught:
        write(results, folder)
    assert str(caught.value) == (
        f"{folder}: an existing folder is replaced only if tapband wrote it; got no results.json of ours; "
        "choose another --out"
    )
    assert [entry.name for entry in folder.iterdir()] == ["results.json"]


def test_a_failure_while_writing_leaves_the_old_result(results: Synthetic, tmp_path: Path) -> None:
    folder = write(results, tmp_path / "out")
    before = {file.name: file.read_bytes() for file in folder.iterdir()}

    def fail(path: Path) -> None:
        path.write_text("half")
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        write(results, folder, also={"report.html": fail})
    assert {file.name: file.read_bytes() for file in folder.iterdir()} == before
    assert [entry.name for entry in tmp_path.iterdir()] == ["out"]


KILLED = """
import os, signal, sys
from pathlib import Path
from tapband.files.write_folder import replacing
with replacing(Path(sys.argv[1])) as stage:
    (stage / "half").write_text("x")
    os.kill(os.getpid(), signal.SIGKILL)
"""


@pytest.mark.skipif(os.name != "posix", reason="needs SIGKILL")
def test_a_killed_run_leaves_the_old_result_and_no_litter(results: Synthetic, tmp_path: Path) -> None:
    folder = write(results, tmp_path / "out")
    before = {file.name: file.read_bytes() for file in folder.iterdir()}
    subprocess.run([sys.executable, "-c", KILLED, str(folder)], check=False)
    assert {file.name: file.read_bytes() for file in folder.iterdir()} == before
    assert len(list(tmp_path.iterdir())) == 2  # the result, and the hidden folder of the killed run
    write(results, folder)
    assert [entry.name for entry in tmp_path.iterdir()] == ["out"]


def test_a_result_moved_away_by_a_killed_run_comes_back(results: Synthetic, tmp_path: Path) -> None:
    folder = write(results, tmp_path / "out")
    process = subprocess.Popen([sys.executable, "-c", ""])
    process.wait()
    folder.rename(tmp_path / f".out.tapband-{process.pid}-0123abcd-old")
    with pytest.raises(RuntimeError), replacing(folder):
        raise RuntimeError
    assert (folder / "results.json").exists()
    assert [entry.name for entry in tmp_path.iterdir()] == ["out"]


@pytest.mark.parametrize(
    ("text", "rule"),
    [
        ("{", "must be JSON"),
        ("[]", "must be a result that tapband wrote"),
        ('{"tapband":"9","format":2}', "format must be 1"),
        ('{"tapband":"9","format":1}', "must hold tables as tapband writes them"),
        ('{"tapband":"9","format":1,"tables":{"cp":{}}}', "must hold tables as tapband writes them"),
    ],
)
def test_a_spoilt_result_is_refused_by_name(text: str, rule: str, tmp_path: Path) -> None:
    (tmp_path / "results.json").write_text(text)
    with pytest.raises(InputError, match=rule):
        read_results.read(tmp_path)


def test_a_result_of_format_1_written_long_ago_still_reads() -> None:
    """The folder beside this file was written by version 0.1.0 and is never written again."""
    parts = read_results.read(Path(__file__).parent / "format_1")
    assert list(parts.tables) == ["coefficients", "cp", "budget", "correlation"]
    frame = parts.tables["coefficients"]
    assert frame["point"].tolist() == ["P001", "P002"]
    assert frame["cl_agrees"].tolist() == ["yes", "yes"]
    assert frame.attrs["units"]["alpha"] == "deg"
    # All digits as they stand in the file.
    assert frame["cl"].tolist() == [-0.22349763069383108, -0.22349763069383108]
    shares = parts.tables["budget"].groupby(["point", "coefficient"])["share"].sum()
    assert shares.to_numpy() == pytest.approx(1.0, abs=1e-12)
    assert np.isinf(parts.tables["budget"]["dof"]).any()
    assert parts.arrays["sensitivity/module zero"].shape == (2, 2, 3)
    assert parts.meta["seed"] == 7
