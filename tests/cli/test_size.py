"""``tapband size``: what it writes, what it prints, and one clear message for each plan that cannot be."""

from __future__ import annotations

import json
from contextlib import redirect_stdout
from io import StringIO
from pathlib import Path

import pandas as pd
import pytest

from tapband.cli import main
from tapband.files.starter import write_starter
from tapband.questions import layout

COLUMNS = {
    "allowances": [
        "source",
        "declared",
        "allowed",
        "unit",
        "headroom",
        "binding_point",
        "binding_coefficient",
    ],
    "selection": ["slot", "option", "cost"],
    "frontier": ["cost", "worst_ratio"],
    "layout": ["tap", "surface", "x", "y"],
    "wiring": ["tap", "module"],
    "ranges": ["tap", "lowest", "highest", "full_scale", "utilisation"],
}
"""First columns as the file formats fix them."""


@pytest.fixture(scope="module")
def starter(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("size") / "demo"
    write_starter(folder)
    return folder / "campaign.toml"


def edited(starter: Path, name: str, *changes: tuple[str, str]) -> Path:
    """The starter campaign with parts of its text replaced, each once."""
    text = starter.read_text(encoding="utf-8")
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new, 1)
    path = starter.parent / f"{name}.toml"
    path.write_text(text, encoding="utf-8")
    return path


KEPT = ("module zero", "port zero", "module gain", "tap location", "flow angle", "angle setting")


def fewer_sources(text: str) -> list[tuple[str, str]]:
    """Changes that take all sources out but those of ``KEPT``."""
    blocks = [block for block in text.split("\n\n") if block.startswith("[[source]]")]
    return [(block, "") for block in blocks if not any(f'"{name}"' in block for name in KEPT)]


def section(text: str, head: str) -> str:
    """A table of the campaign file, its head included, up to the next one."""
    start = text.index(head)
    after = text.find("\n[", start + 1)
    return text[start : after if after > 0 else len(text)]


@pytest.fixture(scope="module")
def said_and_written(starter: Path, tmp_path_factory: pytest.TempPathFactory) -> tuple[str, Path]:
    """What sizing the starter campaign prints and writes, with a small layout and few trials."""
    text = starter.read_text(encoding="utf-8")
    small = [("taps = 31", "taps = 11"), ('fixed = ["N00"]', "fixed = []"), *fewer_sources(text)]
    campaign = edited(starter, "planned", *small)
    out = tmp_path_factory.mktemp("plan") / "plan"
    printed = StringIO()
    with pytest.MonkeyPatch.context() as patch, redirect_stdout(printed):
        patch.setattr(layout, "ITERATIONS", 8)
        assert main(["size", str(campaign), "--out", str(out), "--trials", "300"]) == 0
    return printed.getvalue(), out


@pytest.fixture(scope="module")
def written(said_and_written: tuple[str, Path]) -> Path:
    return said_and_written[1]


def test_size_writes_every_table_with_its_columns(written: Path) -> None:
    for name, columns in COLUMNS.items():
        frame = pd.read_csv(written / f"{name}.csv")
        assert frame.columns.tolist()[: len(columns)] == columns, name
        assert len(frame) > 0, name
    frontier = pd.read_csv(written / "frontier.csv")
    slots = ["pressure scanner", "inclinometer"]
    assert frontier.columns.tolist() == ["cost", "worst_ratio", *slots, "linearised ratio"]
    assert (written / "report.html").stat().st_size > 5000


def test_json_holds_the_plan_and_says_what_kind_it_is(written: Path) -> None:
    content = json.loads((written / "results.json").read_text(encoding="utf-8"))
    assert content["kind"] == "size"
    assert content["targets_can_be_met"] is True
    assert content["exit_status"] == 0
    assert set(COLUMNS) <= set(content["tables"])
    first = "The cheapest options that meet every target cost"
    assert any(note.startswith(first) for note in content["notes"])


def test_summary_fits_eighty_columns(said_and_written: tuple[str, Path]) -> None:
    lines = said_and_written[0].splitlines()
    assert lines[0].startswith("Sizing. ")
    assert max(len(line) for line in lines) <= 80
    assert any("pressure scanner" in line for line in lines)


def test_targets_out_of_reach_exit_with_one_and_write(starter: Path, tmp_path: Path) -> None:
    text = starter.read_text(encoding="utf-8")
    gone = [(section(text, head), "") for head in ("[layout]", "[wiring]")] + fewer_sources(text)
    campaign = edited(starter, "strict", ("expanded = 0.02\n", "expanded = 1e-5\n"), *gone)
    assert main(["size", str(campaign), "--out", str(tmp_path / "plan"), "-q", "--trials", "300"]) == 1
    assert pd.read_csv(tmp_path / "plan" / "selection.csv").empty


def said(capsys: pytest.CaptureFixture[str], campaign: Path) -> str:
    assert main(["size", str(campaign), "--quiet"]) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert "Traceback" not in captured.err
    assert not (campaign.parent / f"{campaign.stem}-results").exists()
    return captured.err.strip()


def test_no_targets(starter: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text = starter.read_text(encoding="utf-8")
    start, end = text.index("[[target]]"), text.index("[[slot]]")
    message = said(capsys, edited(starter, "no_targets", (text[start:end], "")))
    assert message == (
        'size: needs at least one [[target]]; got none; add one, such as coefficient = "cl", expanded = 0.005'
    )


def test_target_where_no_point_is(starter: Path, capsys: pytest.CaptureFixture[str]) -> None:
    campaign = edited(
        starter, "nowhere", ('alpha_range = ["-4 deg", "8 deg"]', 'alpha_range = ["12 deg", "14 deg"]')
    )
    message = said(capsys, campaign)
    assert message.startswith(
        "target[1]: must hold at some point planned for; got none of 4 points, at -4 to 8 deg"
    )


@pytest.mark.parametrize(
    ("name", "old", "new", "words"),
    [
        ("zero_target", "expanded = 0.02\n", "expanded = 0.0\n", "target[1].expanded: must be above 0"),
        ("negative_cost", "cost = 9000", "cost = -9000", "option[1].cost: must "),
        (
            "no_source",
            '  { name = "port zero", expanded = "0.02 % of full scale", k = 2 },\n',
            "",
            'needs a source "port zero", which the slot replaces',
        ),
        ("few_ports", "ports = 16", "ports = 4", "wiring.ports: must give a port to each of 40 taps"),
        ("few_taps", "taps = 31", "taps = 5", "layout.taps: must be at least 7 here; got 5"),
        ("wide_spacing", 'smallest_spacing = "2 mm"', 'smallest_spacing = "60 mm"', "must leave room for"),
        ("past_the_rule", "mach = 0.14", "mach = 0.85", "forecast: inviscid pressures must lie within the range"),
    ],
)  # fmt: skip
def test_a_plan_that_cannot_be_says_why_in_one_message(
    starter: Path, capsys: pytest.CaptureFixture[str], name: str, old: str, new: str, words: str
) -> None:
    message = said(capsys, edited(starter, name, (old, new)))
    assert words in message
    assert len(message.splitlines()) == 1
