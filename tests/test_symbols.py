"""Every column of the coefficients is in the table of symbols, and the table is what code and README use."""

from __future__ import annotations

from pathlib import Path

import tapband
from campaigns import campaign, every_kind
from tapband.files.write_columns import COEFFICIENTS, SUFFIXES, UNITS
from tapband.nouns.symbols import CONDITIONS, ENDINGS, MEASURED, QUANTITIES

README = Path(__file__).parents[1] / "README.md"


def test_columns_of_coefficients_are_quantities_conditions_and_endings() -> None:
    c = campaign(every_kind(), alphas=(2.0,), compressibility="laitone")
    known = {f"{name}{where}{ending}" for name in MEASURED for where in CONDITIONS for ending in ENDINGS}
    known |= {f"{name}{ending}" for name in QUANTITIES for ending in ("", "_u")}
    columns = [n for n in tapband.reduce(c, trials=1000).coefficients if n not in ("point", "run")]
    assert [name for name in columns if name not in known] == []
    assert [name for name in known if name.startswith("cl_ref") and name not in columns] == []


def test_writers_take_names_and_units_from_the_table() -> None:
    assert COEFFICIENTS == MEASURED
    assert tuple(ENDINGS) == SUFFIXES
    for name in ("alpha", "q", "x", "y", "t_total"):
        assert UNITS[name] == QUANTITIES[name].unit


def test_readme_explains_every_coefficient_as_the_table_does() -> None:
    text = README.read_text(encoding="utf-8")
    for name in MEASURED:
        assert f"| `{name}` | {QUANTITIES[name].meaning} |" in text
