"""Every fault of the corpus ends in its whole message; nothing else is said and nothing else is raised."""

from __future__ import annotations

from pathlib import Path

import pytest

from bad_input_corpus import build, cases, good, read
from tapband.files.load import load
from tapband.nouns.errors import InputError


@pytest.mark.parametrize("path", cases(), ids=lambda path: path.stem)
def test_fault_is_reported_whole(path: Path, tmp_path: Path) -> None:
    case = read(path)
    with pytest.raises(InputError) as caught:
        load(build(case, tmp_path))
    assert str(caught.value) == case["message"].rstrip("\n")


def test_corpus_holds_sixty_faults_or_more() -> None:
    assert len(cases()) >= 60


def test_every_message_names_file_rule_and_remedy() -> None:
    for path in cases():
        for line in read(path)["message"].strip().split("\n"):
            assert line.split(":")[0].split(",")[0].endswith((".toml", ".csv", ".xls", ".xlsx", ".parquet"))
            assert "; " in line, f"{path.stem}: {line}"


def test_good_campaign_loads_without_a_warning(tmp_path: Path) -> None:
    assert load(good(tmp_path)).warnings == ()


def test_folder_in_place_of_a_campaign_offers_the_file_inside(tmp_path: Path) -> None:
    good(tmp_path)
    with pytest.raises(InputError) as caught:
        load(tmp_path)
    assert str(caught.value) == f"{tmp_path}: must be a file; got a folder; give {tmp_path}/campaign.toml"


def test_the_folder_one_stands_in_is_named_too(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    good(tmp_path)
    monkeypatch.chdir(tmp_path)
    with pytest.raises(InputError) as caught:
        load(".")
    assert str(caught.value) == ".: must be a file; got a folder; give campaign.toml"


def test_misspelt_campaign_offers_the_nearest_name(tmp_path: Path) -> None:
    good(tmp_path)
    with pytest.raises(InputError) as caught:
        load(tmp_path / "campain.toml")
    assert str(caught.value) == "campain.toml: no such file; did you mean campaign.toml?"


@pytest.mark.parametrize("name", ["campaign\0.toml", "x" * 5000 + ".toml", "nowhere/campaign.toml"])
def test_impossible_names_are_faults(name: str, tmp_path: Path) -> None:
    with pytest.raises(InputError):
        load(tmp_path / name)


def test_many_faults_of_one_column_are_counted(tmp_path: Path) -> None:
    text = (good(tmp_path).parent / "points.csv").read_text()
    header, first, *_ = text.splitlines()
    rows = [first.replace("a1,", f"b{i},").replace("1499.2", "lost") for i in range(20)]
    (tmp_path / "points.csv").write_text("\n".join([header, *rows]) + "\n")
    with pytest.raises(InputError) as caught:
        load(tmp_path / "campaign.toml")
    lines = str(caught.value).split("\n")
    assert len([line for line in lines if "lost" in line]) == 8
    assert "points.csv, column U00: must be a number; got 12 more like the above" in lines
