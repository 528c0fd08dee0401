"""The corpus of bad input: a good campaign, and one file a fault that says what to change in it."""

from __future__ import annotations

import shutil
import tomllib
from pathlib import Path
from typing import Any

FOLDER = Path(__file__).parent / "bad_inputs"
GOOD = FOLDER / "good"


def cases() -> list[Path]:
    """Every case of the corpus."""
    return sorted(FOLDER.glob("*.toml"))


def build(case: dict[str, Any], folder: Path) -> Path:
    """The good campaign with the changes of a case, in ``folder``; the path of its campaign file.

    A case holds ``change`` (file, find, put: the first match is replaced), ``file`` (name, text: written
    whole), ``encode`` (file to encoding) and ``remove`` (files), in this order.
    """
    for source in GOOD.iterdir():
        shutil.copyfile(source, folder / source.name)
    for change in case.get("change", []):
        path = folder / change["file"]
        text = path.read_text(encoding="utf-8")
        assert change["find"] in text, f"{change['find']!r} is not in {change['file']}"
        path.write_text(text.replace(change["find"], change["put"], 1), encoding="utf-8", newline="")
    for file in case.get("file", []):
        (folder / file["name"]).write_text(file["text"], encoding="utf-8", newline="")
    for name, encoding in case.get("encode", {}).items():
        path = folder / name
        path.write_bytes(path.read_text(encoding="utf-8").encode(encoding))
    for name in case.get("remove", []):
        (folder / name).unlink()
    return folder / "campaign.toml"


def read(path: Path) -> dict[str, Any]:
    """One case."""
    return tomllib.loads(path.read_text(encoding="utf-8"))


def good(folder: Path, *changes: tuple[str, str, str], **files: str) -> Path:
    """The good campaign in ``folder`` with changes (file, find, put) and files (name_csv=text) of a test."""
    case = {
        "change": [{"file": file, "find": find, "put": put} for file, find, put in changes],
        "file": [{"name": name.replace("_csv", ".csv"), "text": text} for name, text in files.items()],
    }
    return build(case, folder)
