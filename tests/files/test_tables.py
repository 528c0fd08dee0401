"""Tables in every dialect and kind of file become the same campaign."""

from __future__ import annotations

import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from bad_input_corpus import GOOD, good
from tapband.files.load import load
from tapband.nouns.campaign import Campaign, Points
from tapband.nouns.errors import InputError

TABLES = ("contour.csv", "taps.csv", "points.csv")


def points_of(campaign: Campaign) -> Points:
    """The points, which the good campaign has."""
    assert campaign.points is not None
    return campaign.points


def same(a: Campaign, b: Campaign) -> None:
    """Two campaigns hold the same numbers, bit for bit."""
    pa, pb = points_of(a), points_of(b)
    for left, right in ((a.section.x, b.section.x), (a.section.y, b.section.y), (a.taps.s, b.taps.s)):
        np.testing.assert_array_equal(left, right)
    np.testing.assert_array_equal(pa.readings, pb.readings)
    np.testing.assert_array_equal(pa.alpha, pb.alpha)
    for name in pa.channels:
        np.testing.assert_array_equal(pa.channels[name], pb.channels[name])
    assert (pa.names, pa.runs, pa.columns) == (pb.names, pb.runs, pb.columns)
    assert a.taps.names == b.taps.names
    for name in ("module", "surface"):  # "hole" is a group by its text, 0.4 here and 0,4 there
        assert a.taps.columns[name] == b.taps.columns[name]


def semicolons(text: str) -> str:
    return text.replace(",", ";")


def decimal_commas(text: str) -> str:
    return text.replace(",", ";").replace(".", ",")


def tabs(text: str) -> str:
    return text.replace(",", "\t")


def tabs_with_decimal_commas(text: str) -> str:
    return text.replace(",", "\t").replace(".", ",")


def byte_order_mark(text: str) -> str:
    return "\ufeff" + text


def carriage_returns(text: str) -> str:
    return text.replace("\n", "\r\n")


def old_line_ends(text: str) -> str:
    return text.replace("\n", "\r")


def comments_and_blank_lines(text: str) -> str:
    return "# made by hand\n\n" + text.replace("\n", "\n# in between\n\n,,,\n", 3)


def quoted(text: str) -> str:
    return "\n".join(",".join(f'"{cell}"' for cell in line.split(",")) for line in text.splitlines()) + "\n"


def spaced(text: str) -> str:
    return text.replace(",", " , ")


def closing_delimiter(text: str) -> str:
    return text.replace("\n", ";\n").replace(",", ";")


def no_last_line_end(text: str) -> str:
    return text.rstrip("\n")


DIALECTS = (
    semicolons, decimal_commas, tabs, tabs_with_decimal_commas, byte_order_mark, carriage_returns,
    old_line_ends, comments_and_blank_lines, quoted, spaced, closing_delimiter, no_last_line_end,
)  # fmt: skip


@pytest.mark.parametrize("dialect", DIALECTS, ids=lambda dialect: dialect.__name__)
def test_dialect_changes_no_number(dialect: Callable[[str], str], tmp_path: Path) -> None:
    plain, other = tmp_path / "plain", tmp_path / "other"
    plain.mkdir()
    other.mkdir()
    campaign = good(other)
    for name in TABLES:
        lines = (GOOD / name).read_text(encoding="utf-8").splitlines(keepends=True)
        text = "".join(line for line in lines if not line.startswith("#"))
        (other / name).write_text(dialect(text), encoding="utf-8", newline="")
    same(load(good(plain)), load(campaign))


@pytest.mark.parametrize("token", ["", "NA", "NaN", "#N/A", "nan", " NA "])
def test_missing_tokens_lose_the_reading(token: str, tmp_path: Path) -> None:
    points = points_of(load(good(tmp_path, ("points.csv", "1500.7,-5942.8", f"1500.7,{token}"))))
    lost = np.isnan(points.readings)
    assert lost.sum() == 1
    assert lost[points.keys.index("R2/a3"), 1]


def test_missing_token_in_a_table_of_decimal_commas(tmp_path: Path) -> None:
    campaign = good(tmp_path)
    text = decimal_commas((GOOD / "points.csv").read_text()).replace("1500,7;-5942,8", "1500,7;")
    (tmp_path / "points.csv").write_text(text)
    assert np.isnan(points_of(load(campaign)).readings).sum() == 1


def test_missing_token_at_the_start_of_a_line_is_no_comment(tmp_path: Path) -> None:
    campaign = good(tmp_path)
    rows = [line.split(",") for line in (GOOD / "points.csv").read_text().splitlines()]
    rows[-1][8] = "#N/A"
    text = "\n".join(",".join([*row[8:9], *row[:8], *row[9:]]) for row in rows)
    (tmp_path / "points.csv").write_text(text)
    points = points_of(load(campaign))
    assert np.isnan(points.readings[points.keys.index("R2/a3"), 1])


def test_units_in_headers_become_si(tmp_path: Path) -> None:
    changes = (
        ("points.csv", "alpha [deg]", "alpha [rad]"),
        ("points.csv", "t_total [K]", "t_total [degC]"),
        ("points.csv", "p_total [Pa],p_static [Pa]", "p_total [hPa],p_static [hPa]"),
        ("points.csv", "U00 [Pa]", "U00 [psi]"),
    )
    text = (GOOD / "points.csv").read_text().splitlines()[0]
    for _, find, put in changes:
        text = text.replace(find, put)
    row = "a1,R1,clean,0.1,1015,1000,20.05,0.2" + ",-10" * 12
    points = points_of(
        load(good(tmp_path, points_csv=text + "\n" + row + "\n" + row.replace("a1,R1", "a3,R2")))
    )
    assert points.alpha[0] == 0.1
    assert points.channels["p_total"][0] == 101500.0
    assert points.t_total is not None
    assert points.t_total[0] == pytest.approx(293.2, rel=1e-15)
    assert points.readings[0, 0] == pytest.approx(0.2 * 6894.757293168361, rel=1e-15)


def test_contour_and_taps_in_millimetres_become_chords(tmp_path: Path) -> None:
    plain, other = tmp_path / "plain", tmp_path / "other"
    plain.mkdir()
    other.mkdir()

    def scaled(name: str, columns: tuple[int, ...], head: str) -> str:
        lines = [line for line in (GOOD / name).read_text().splitlines() if not line.startswith("#")]
        rows = [line.split(",") for line in lines[1:]]
        for row in rows:
            for column in columns:
                row[column] = f"{float(row[column]) * 400.0:.9g}"
        return "\n".join([head, *(",".join(row) for row in rows)]) + "\n"

    contour = scaled("contour.csv", (0, 1), "x [mm],y [mm]")
    taps = scaled("taps.csv", (2,), "tap,surface,x [mm],module,full_scale [kPa],hole [mm]")
    a, b = load(good(plain)), load(good(other, contour_csv=contour, taps_csv=taps))
    np.testing.assert_allclose(b.taps.s, a.taps.s, atol=1e-12)  # rounding of 400 x / 400
    assert not (a.section.contour_in_lengths)
    assert not (a.taps.placed_in_lengths)
    assert b.section.contour_in_lengths
    assert b.taps.placed_in_lengths


def test_workbook_holds_the_same_tables(tmp_path: Path) -> None:
    pd, _ = pytest.importorskip("pandas"), pytest.importorskip("openpyxl")
    campaign = good(tmp_path, *[("campaign.toml", name, name.replace("csv", "xlsx")) for name in TABLES])
    for name in TABLES:
        frame = pd.read_csv(GOOD / name, comment="#")
        frame.to_excel(tmp_path / name.replace("csv", "xlsx"), index=False)
    plain = tmp_path / "plain"
    plain.mkdir()
    same(load(good(plain)), load(campaign))


def test_parquet_holds_the_same_tables(tmp_path: Path) -> None:
    pd, _ = pytest.importorskip("pandas"), pytest.importorskip("pyarrow")
    campaign = good(tmp_path, *[("campaign.toml", name, name.replace("csv", "parquet")) for name in TABLES])
    for name in TABLES:
        pd.read_csv(GOOD / name, comment="#").to_parquet(tmp_path / name.replace("csv", "parquet"))
    plain = tmp_path / "plain"
    plain.mkdir()
    same(load(good(plain)), load(campaign))


@pytest.mark.parametrize(
    ("kind", "module", "extra"), [("xlsx", "openpyxl", "excel"), ("parquet", "pyarrow", "parquet")]
)
def test_missing_extra_is_named(
    kind: str, module: str, extra: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(sys.modules, module, None)  # an import of it fails, as where it is not installed
    campaign = good(tmp_path, ("campaign.toml", "taps.csv", f"taps.{kind}"))
    (tmp_path / f"taps.{kind}").write_bytes(b"PK\x03\x04" if kind == "xlsx" else b"PAR1")
    with pytest.raises(InputError) as caught:
        load(campaign)
    assert str(caught.value) == (
        f"taps.{kind}: needs the extra \"{extra}\"; got no {module}; run pip install 'tapband[{extra}]'"
    )


def test_bad_cell_of_a_workbook_is_named_by_row(tmp_path: Path) -> None:
    openpyxl = pytest.importorskip("openpyxl")
    book = openpyxl.Workbook()
    for line in (GOOD / "taps.csv").read_text().splitlines():
        book.active.append(
            [cell if i in (0, 1, 3) or "x" in line else float(cell) for i, cell in enumerate(line.split(","))]
        )
    book.active["C4"] = "there"
    book.save(tmp_path / "taps.xlsx")
    campaign = good(tmp_path, ("campaign.toml", "taps.csv", "taps.xlsx"))
    with pytest.raises(InputError) as caught:
        load(campaign)
    assert str(caught.value).startswith(
        'taps.xlsx, row 4, column x: must be a number; got "there"; write a number, or leave the cell empty'
    )


@pytest.mark.parametrize("mark", [";", "\t"])
def test_one_row_of_decimal_commas_is_read(mark: str, tmp_path: Path) -> None:
    campaign = good(tmp_path)
    text = [line for line in (GOOD / "points.csv").read_text().splitlines() if not line.startswith("#")][:2]
    (tmp_path / "points.csv").write_text("\n".join(text) + "\n")
    plain = points_of(load(campaign))
    commas = "\n".join(text).replace(",", mark).replace(".", ",") + "\n"
    (tmp_path / "points.csv").write_text(commas)
    np.testing.assert_array_equal(points_of(load(campaign)).readings, plain.readings)


def test_a_cell_that_is_no_number_is_said_once(tmp_path: Path) -> None:
    campaign = good(tmp_path)
    rows = [line for line in (GOOD / "points.csv").read_text().splitlines() if not line.startswith("#")]
    names, cells = rows[0].split(","), rows[1].split(",")
    numbers = [i for i, name in enumerate(names) if "[" in name]
    bad = [f"lost{i}" if i in numbers else cell for i, cell in enumerate(cells)]
    (tmp_path / "points.csv").write_text(rows[0] + "\n" + ",".join(bad) + "\n")
    with pytest.raises(InputError) as caught:
        load(campaign)
    assert str(caught.value).split("\n") == [
        f'points.csv, line 2, column {names[i].split(" ")[0]}: must be a number; got "lost{i}"; '
        "write a number, or leave the cell empty where it is missing"
        for i in numbers
    ]


def test_a_line_break_inside_a_cell_is_named(tmp_path: Path) -> None:
    campaign = good(tmp_path)
    rows = [line for line in (GOOD / "points.csv").read_text().splitlines() if not line.startswith("#")]
    rest = rows[1].split(",", 1)[1]
    (tmp_path / "points.csv").write_text("\n".join([rows[0], f'"a\n1",{rest}', *rows[2:]]) + "\n")
    with pytest.raises(InputError) as caught:
        load(campaign)
    assert str(caught.value) == (
        'points.csv, line 2: must not break the line inside a cell: such breaks are not read; got ""a"; '
        "write the cell on one line, or remove the quotation mark"
    )


def test_a_line_break_inside_a_heading_is_named(tmp_path: Path) -> None:
    campaign = good(tmp_path, contour_csv='x,"y\n"\n1,0\n')
    with pytest.raises(InputError) as caught:
        load(campaign)
    assert str(caught.value) == (
        'contour.csv, line 1: must not break the line inside a cell: such breaks are not read; got "x,"y"; '
        "write the cell on one line, or remove the quotation mark"
    )


def test_an_angle_past_half_a_turn_is_refused_in_its_own_unit(tmp_path: Path) -> None:
    campaign = good(tmp_path, ("points.csv", "alpha [deg]", "alpha [rad]"))
    first = [line for line in (GOOD / "points.csv").read_text().splitlines() if not line.startswith("#")][1]
    text = (tmp_path / "points.csv").read_text().splitlines()
    names = next(line for line in text if not line.startswith("#")).split(",")
    cells = first.split(",")
    cells[names.index("alpha [rad]")] = "4"
    (tmp_path / "points.csv").write_text(",".join(names) + "\n" + ",".join(cells) + "\n")
    with pytest.raises(InputError) as caught:
        load(campaign)
    assert str(caught.value) == (
        "points.csv, line 2, column alpha: must lie within ±3.14159 rad (±180 deg); got 4; "
        "correct the angle or its unit"
    )
