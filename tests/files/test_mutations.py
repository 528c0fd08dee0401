"""A good campaign damaged at random either loads or ends in faults, never in another exception."""

from __future__ import annotations

import tempfile
import tomllib
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from bad_input_corpus import GOOD, good
from tapband.files.load import load
from tapband.nouns.errors import Fault, InputError

QUICK = settings(
    max_examples=150,
    derandomize=True,
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow],
    database=None,
)
WORDS = (
    "", " ", "35", "35 Pa", "-1 deg", "1e999 Pa", "nan", "inf", "% of reading", "5 %", "0.1 inH2O", "by run",
    "by ", "common", "relative to ", "relative to mach", "points.csv", ".", "campaign.toml", "U00", "cl",
)  # fmt: skip
JUNK = st.one_of(
    st.sampled_from(WORDS),
    st.integers(-3, 10**20),
    st.floats(),
    st.booleans(),
    st.text(max_size=12),
    st.lists(st.sampled_from(["1 Pa", 2, "x", True, "0.1 % of reading"]), max_size=3),
    st.dictionaries(
        st.sampled_from(["module", "cp", "name", "x"]), st.sampled_from(["M1", 0.1, 3]), max_size=2
    ),
)
CELLS = (
    "", "NA", "nan", "#N/A", "inf", "-inf", "1e400", "lost", "1,5", "1.2.3", '"', '"7"', "upper", "M1", "-1",
    "0", "1e300", "１２", "\t", ";", "\x0b", "a1", "#",
)  # fmt: skip


def _places(value: Any, path: tuple[Any, ...] = ()) -> list[tuple[Any, ...]]:
    """Paths of every value of a document."""
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    return [found for key, item in items for found in [(*path, key), *_places(item, (*path, key))]]


PLACES = _places(tomllib.loads((GOOD / "campaign.toml").read_text()))
DAMAGE = st.tuples(st.sampled_from(PLACES), st.sampled_from(["drop", "rename", "put"]), JUNK)


def _toml(value: object) -> str:
    """A value as inline TOML."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return '"' + "".join(f"\\U{ord(c):08x}" if ord(c) < 32 or c in '"\\\x7f' else c for c in value) + '"'
    if isinstance(value, list):
        return "[" + ", ".join(_toml(item) for item in value) + "]"
    if isinstance(value, dict):
        return "{" + ", ".join(f"{_toml(key)} = {_toml(item)}" for key, item in value.items()) + "}"
    return repr(value)


def _either_way(path: Path) -> None:
    """Loading ends in a campaign or in faults, each of them said in full."""
    faults: Sequence[Fault] = ()
    try:
        load(path)
    except InputError as error:
        faults = error.faults or (Fault(where="", rule=""),)
    assert all(fault.where and fault.rule for fault in faults)


@QUICK
@given(
    st.lists(st.tuples(st.sampled_from(PLACES), st.sampled_from(["drop", "rename", "put"]), JUNK), max_size=3)
)
def test_damaged_campaign_files_load_or_end_in_faults(damage: list[tuple[tuple[Any, ...], str, Any]]) -> None:
    document: Any = tomllib.loads((GOOD / "campaign.toml").read_text())
    for path, how, junk in damage:
        owner = document
        try:
            for key in path[:-1]:
                owner = owner[key]
            old = owner[path[-1]]
        except (KeyError, IndexError, TypeError):
            continue
        if not isinstance(owner, (dict, list)):
            continue
        if how == "put":
            owner[path[-1]] = junk
        else:
            del owner[path[-1]]
        if how == "rename" and isinstance(owner, dict):
            owner[str(path[-1])[:-1] or "x"] = old
    with tempfile.TemporaryDirectory() as folder:
        campaign = good(Path(folder))
        body = "\n".join(f"{_toml(key)} = {_toml(value)}" for key, value in document.items())
        campaign.write_text(body, encoding="utf-8")
        _either_way(campaign)


@QUICK
@given(
    st.sampled_from(["contour.csv", "taps.csv", "points.csv"]),
    st.lists(st.tuples(st.integers(0, 200), st.integers(0, 25), st.sampled_from(CELLS)), max_size=3),
    st.sampled_from(["none", "column", "row", "cut"]), st.integers(0, 60),
)  # fmt: skip
def test_damaged_tables_load_or_end_in_faults(
    name: str, garbled: list[tuple[int, int, str]], drop: str, at: int
) -> None:
    rows = [line.split(",") for line in (GOOD / name).read_text().splitlines()]
    for row, column, cell in garbled:
        line = rows[row % len(rows)]
        line[column % len(line)] = cell
    if drop == "column":
        rows = [row[: at % len(row)] + row[at % len(row) + 1 :] for row in rows]
    elif drop == "row":
        del rows[at % len(rows)]
    text = "\n".join(",".join(row) for row in rows) + "\n"
    if drop == "cut":
        text = text[: len(text) * at // 60]
    with tempfile.TemporaryDirectory() as folder:
        campaign = good(Path(folder))
        (Path(folder) / name).write_text(text, encoding="utf-8", newline="")
        _either_way(campaign)


@QUICK
@given(st.binary(max_size=200), st.sampled_from(["campaign.toml", "contour.csv", "taps.csv", "points.csv"]))
def test_random_bytes_end_in_faults(data: bytes, name: str) -> None:
    with tempfile.TemporaryDirectory() as folder:
        campaign = good(Path(folder))
        (Path(folder) / name).write_bytes(data)
        _either_way(campaign)


@QUICK
@given(st.integers(0, 3000), st.binary(min_size=1, max_size=3))
def test_bytes_put_into_the_campaign_file_load_or_end_in_faults(at: int, data: bytes) -> None:
    with tempfile.TemporaryDirectory() as folder:
        campaign = good(Path(folder))
        text = campaign.read_bytes()
        at %= len(text)
        campaign.write_bytes(text[:at] + data + text[at + len(data) :])
        _either_way(campaign)
