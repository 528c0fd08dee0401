"""Rows become points, repeated rows samples; what belongs to a point keeps its name and group."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from bad_input_corpus import GOOD, good
from tapband.files import points as reading
from tapband.files.load import load
from tapband.files.means import Means
from tapband.nouns.campaign import Points, Rows
from tapband.nouns.errors import InputError


def points_in(folder: Path, *changes: tuple[str, str, str], **files: str) -> Points:
    """Points of the good campaign after changes."""
    points = load(good(folder, *changes, **files)).points
    assert points is not None
    return points


def test_points_keep_the_order_of_their_first_rows(tmp_path: Path) -> None:
    assert points_in(tmp_path).keys == ("R1/a1", "R1/a2", "R2/a1", "R2/a3")


def test_rows_of_one_key_are_samples_and_their_mean_stands_for_them(tmp_path: Path) -> None:
    points = points_in(tmp_path)
    assert points.counts.tolist() == [1, 2, 1, 1]
    assert points.readings[1, 0] == pytest.approx(0.5 * (1501.6 + 1498.4), rel=1e-15)
    assert points.columns["config"] == ("clean", "clean", "trip", "trip")


def test_samples_stream_in_file_order(tmp_path: Path) -> None:
    points = points_in(tmp_path)
    assert points.blocks is not None
    for _ in range(2):  # a factory: every call begins anew
        rows = list(points.blocks())
        assert np.concatenate([block.point for block in rows]).tolist() == [0, 1, 1, 2, 3]
        readings = np.concatenate([block.readings for block in rows])
        assert readings[1:3, 0].tolist() == [1501.6, 1498.4]
        assert rows[0].channels["p_total"].tolist() == [101500.0] * 5


def test_points_of_one_row_each_have_no_stream(tmp_path: Path) -> None:
    text = (GOOD / "points.csv").read_text().splitlines()
    assert points_in(tmp_path, points_csv="\n".join([*text[:3], *text[4:]])).blocks is None


def test_long_tables_are_read_again_instead_of_kept(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    kept = points_in(tmp_path)
    monkeypatch.setattr(reading, "KEEP", 10)
    again = points_in(tmp_path)
    assert kept.blocks is not None
    assert again.blocks is not None
    assert kept.blocks.__name__ != again.blocks.__name__
    for a, b in zip(_whole(list(kept.blocks())), _whole(list(again.blocks())), strict=True):
        np.testing.assert_array_equal(a, b)


def test_table_that_changes_while_it_is_used_is_a_fault(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(reading, "KEEP", 10)
    points = points_in(tmp_path)
    assert points.blocks is not None
    text = (tmp_path / "points.csv").read_text()
    (tmp_path / "points.csv").write_text("".join(text.splitlines(keepends=True)[:-1]))
    with pytest.raises(InputError) as caught:
        list(points.blocks())
    assert str(caught.value) == "points.csv: changed while it was used; start again"


def _whole(blocks: list[Rows]) -> tuple[np.ndarray, ...]:
    return tuple(
        np.concatenate([getattr(b, name) for b in blocks]) for name in ("point", "alpha", "readings")
    )


def test_reading_lost_in_one_sample_is_lost_at_the_point(tmp_path: Path) -> None:
    points = points_in(tmp_path, ("points.csv", "1498.4,-3631.0", "1498.4,"))
    assert np.isnan(points.readings[1, 1])
    assert np.isfinite(np.delete(points.readings[1], 1)).all()


def test_mean_of_equal_rows_is_that_row_exactly() -> None:
    means = Means(2)
    row = np.array([[0.1, 1.0 / 3.0]])
    for _ in range(7):
        means.add(np.zeros(3, dtype=np.int64), np.repeat(row, 3, axis=0))
    assert means.counts.tolist() == [21]
    np.testing.assert_array_equal(means.means, row)


def test_means_of_scattered_rows_equal_numpys() -> None:
    random = np.random.default_rng(3)
    numbers, drawn = random.normal(1e5, 30.0, (500, 3)), random.integers(0, 7, 500).tolist()
    order = list(dict.fromkeys(drawn))  # a new point's index follows on the last one
    point = np.array([order.index(value) for value in drawn])
    means = Means(3)
    for part in range(0, 500, 64):
        means.add(point[part : part + 64], numbers[part : part + 64])
    expected = np.array([numbers[point == p].mean(axis=0) for p in range(7)])
    np.testing.assert_allclose(means.means, expected, rtol=1e-13)  # rounding of sums of 500 numbers


def test_column_that_changes_within_a_point_is_no_group(tmp_path: Path) -> None:
    points = points_in(tmp_path, ("points.csv", "a2,R1,clean,4", "a2,R1,other,4"))
    assert set(points.columns) == {"point", "run"}


def test_table_without_runs_has_empty_runs(tmp_path: Path) -> None:
    changes = [
        ("campaign.toml", 'across_points = "by run"', 'across_points = "common"'),
        ("points.csv", ",run,", ",day,"),
        ("points.csv", "a1,R2", "a4,R2"),
    ]  # fmt: skip
    points = points_in(tmp_path, *changes)
    assert points.keys == ("a1", "a2", "a4", "a3")
    assert points.columns["day"] == ("R1", "R1", "R2", "R2")


def test_nominal_condition_may_be_blank_at_points_without_one(tmp_path: Path) -> None:
    text = (GOOD / "points.csv").read_text().replace("t_total [K]", "nominal_alpha [deg]")
    for cell in ("4", "", ""):
        text = text.replace("100000,293.2", f"100000,{cell}", 1)
    points = points_in(tmp_path, points_csv=text.replace("100000,293.2", "100000,8"))
    assert points.t_total is None
    assert points.nominal_alpha is not None
    np.testing.assert_allclose(np.degrees(points.nominal_alpha[[0, 2]]), [4.0, 8.0], rtol=1e-14)
    assert np.isnan(points.nominal_alpha[1])


def test_excluded_tap_needs_no_column(tmp_path: Path) -> None:
    points = points_in(tmp_path, ("points.csv", "U03 [Pa]", "note"))
    assert np.isnan(points.readings[:, 3]).all()


def test_arrays_are_read_only(tmp_path: Path) -> None:
    points = points_in(tmp_path)
    for array in (points.alpha, points.readings, points.counts, points.channels["p_total"]):
        with pytest.raises(ValueError, match="read-only"):
            array[...] = 0


@pytest.mark.parametrize(
    ("change", "warning"),
    [
        (
            ("points.csv", "p_static [Pa],t_total [K]", "p_static [Pa],p_wall [Pa]"),
            "points.csv: a column that is no tap is not used: p_wall",
        ),
        (("points.csv", ",config,", ",U77,"), "points.csv: a column that is no tap is not used: U77"),
    ],
)
def test_column_that_reads_no_tap_is_named(
    change: tuple[str, str, str], warning: str, tmp_path: Path
) -> None:
    assert load(good(tmp_path, change)).warnings == (warning,)
