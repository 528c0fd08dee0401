"""Taps stand where the table puts them, whichever way it says so."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from bad_input_corpus import GOOD, good
from tapband.files.load import load
from tapband.nouns.campaign import Taps


def taps_of(folder: Path, taps: str = "", **files: str) -> Taps:
    """Taps of the good campaign, its tap table replaced where one is given."""
    return load(good(folder, **({"taps_csv": taps} if taps else {}), **files)).taps


def table_of(taps: Taps, places: str, *columns: np.ndarray) -> str:
    """A tap table with other columns of places."""
    rows = zip(taps.names, *columns, taps.columns["module"], strict=True)
    body = [",".join(str(cell) for cell in row) + ",7" for row in rows]
    return "\n".join([f"tap,{places},module,full_scale [kPa]", *body]) + "\n"


def test_place_by_x_and_y_equals_place_by_x_and_surface(tmp_path: Path) -> None:
    """x and y are rounded to 1e-9, which moves a place by a hundredth of the bound."""
    taps = taps_of(tmp_path)
    table = table_of(taps, "x,y", np.round(taps.x, 9), np.round(taps.y, 9))
    np.testing.assert_allclose(taps_of(tmp_path, table).s, taps.s, atol=1e-7)


def test_place_by_arc_length_is_taken_as_it_stands(tmp_path: Path) -> None:
    taps = taps_of(tmp_path)
    found = taps_of(tmp_path, table_of(taps, "s", taps.s))
    np.testing.assert_array_equal(found.s, taps.s)
    np.testing.assert_array_equal(found.x, taps.x)


def test_arc_length_beside_x_must_only_agree(tmp_path: Path) -> None:
    taps = taps_of(tmp_path)
    table = table_of(taps, "x,surface,s", taps.x, np.array(taps.columns["surface"]), np.round(taps.s, 3))
    np.testing.assert_allclose(taps_of(tmp_path, table).s, taps.s, atol=1e-12)


def test_stated_surface_is_kept_at_the_nose(tmp_path: Path) -> None:
    assert taps_of(tmp_path).upper[0]
    changed = (GOOD / "taps.csv").read_text().replace("U00,upper", "U00,lower")
    assert not taps_of(tmp_path, changed).upper[0]


def test_direction_of_travel_changes_no_place(tmp_path: Path) -> None:
    comment, head, *rows = (GOOD / "contour.csv").read_text().splitlines()
    turned = "\n".join([comment, head, *rows[::-1]])
    np.testing.assert_allclose(taps_of(tmp_path, contour_csv=turned).s, taps_of(tmp_path).s, atol=1e-12)


def test_excluded_taps_stay_in_the_table(tmp_path: Path) -> None:
    taps = taps_of(tmp_path)
    assert taps.excluded.tolist() == [name == "U03" for name in taps.names]
    assert np.isfinite(taps.s).all()


def test_full_scale_may_be_blank_where_no_size_needs_it(tmp_path: Path) -> None:
    text = (GOOD / "taps.csv").read_text()
    blank = text.replace("U03,upper,0.2,M2,7", "U03,upper,0.2,M2,")
    taps = taps_of(tmp_path, blank)
    assert np.isnan(taps.full_scale[3])
    assert taps.full_scale[0] == 7000.0


def test_further_columns_are_groups_by_their_text(tmp_path: Path) -> None:
    taps = taps_of(tmp_path)
    assert set(taps.columns) == {"surface", "module", "hole"}
    assert set(taps.columns["hole"]) == {"0.4"}


def test_arrays_are_read_only(tmp_path: Path) -> None:
    taps = taps_of(tmp_path)
    for array in (taps.s, taps.x, taps.y, taps.upper, taps.excluded, taps.full_scale):
        with pytest.raises(ValueError, match="read-only"):
            array[...] = 0
