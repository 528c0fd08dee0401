"""Slips a newcomer makes: each message offers what was probably meant, and never a value 1000 times off."""

from __future__ import annotations

from pathlib import Path

import pytest

from bad_input_corpus import good
from tapband.files.load import load
from tapband.nouns.errors import InputError


def refusal(path: Path) -> str:
    with pytest.raises(InputError) as caught:
        load(path)
    return str(caught.value)


def campaign_with(folder: Path, key: str, value: str) -> Path:
    """The good campaign, one line of its file replaced."""
    path = good(folder)
    lines = path.read_text(encoding="utf-8").splitlines()
    at = next(i for i, line in enumerate(lines) if line.startswith(f"{key} ="))
    lines[at] = f"{key} = {value}"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


@pytest.mark.parametrize(("word", "meant"), [("sttic", "static"), ("totl", "total"), ("vacum", "vacuum")])
def test_a_misspelt_reference_pressure_offers_the_nearest_word(word: str, meant: str, tmp_path: Path) -> None:
    assert refusal(campaign_with(tmp_path, "pressures", f'"relative to {word}"')) == (
        f'points.csv: needs the column {word} (readings are "relative to {word}"); got none of that name; '
        f'write pressures = "relative to {meant}", or add the column {word}'
    )


def test_a_chord_without_a_unit_offers_no_unit_as_the_likely_one(tmp_path: Path) -> None:
    said = refusal(campaign_with(tmp_path, "chord", "0.3"))
    rule = "campaign.toml, section.chord: needs a unit; got 0.3"
    assert said == f'{rule}; write the unit that is meant, as in "0.3 mm" or "0.3 m"'


def test_a_chord_that_no_tunnel_holds_is_warned_of(tmp_path: Path) -> None:
    warnings = load(campaign_with(tmp_path, "chord", '"300 m"')).warnings
    rule = 'campaign.toml, section.chord: "300 m" is a chord of 300 m'
    assert f"{rule}; see whether its unit is right" in warnings


def test_a_level_of_everything_is_refused(tmp_path: Path) -> None:
    path = good(tmp_path)
    text = path.read_text(encoding="utf-8").split("\n")
    text = [line for line in text if not line.startswith("level = 0.95") or "U" in line]
    at = text.index("[intervals]")
    path.write_text("\n".join([*text[: at + 1], "level = 0.999999999", *text[at + 1 :]]), encoding="utf-8")
    rule = "campaign.toml, intervals.level: must be at most 0.9999; got 0.999999999"
    assert refusal(path) == f"{rule}; write for example 0.95"
