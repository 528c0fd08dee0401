"""The campaign file as text: decoded, parsed as TOML, its source headers found by line."""

from __future__ import annotations

import os
import re
import tomllib
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from tapband.files.faults import Findings, nearest, shown


@dataclass(frozen=True, slots=True, kw_only=True)
class CampaignText:
    """The file's name, its text, the parsed document, and the line of each ``[[source]]`` in order."""

    file: str
    text: str
    document: dict[str, Any]
    source_lines: tuple[int, ...]

    def source_label(self, index: int) -> str:
        """How a message names a source as a whole (``index`` counts from 0)."""
        sources = self.document.get("source")
        table = sources[index] if isinstance(sources, list) and index < len(sources) else None
        name = table.get("name") if isinstance(table, dict) else None
        called = f" {shown(name)}" if isinstance(name, str) and name else ""
        line = f" (line {self.source_lines[index]})" if index < len(self.source_lines) else ""
        return f"source[{index + 1}]{called}{line}"


def read_campaign_text(path: Path, findings: Findings) -> CampaignText | None:
    """The campaign file, None where it cannot be read or parsed."""
    text = read_text(path, path.name, findings)
    if text is None:
        return None
    try:
        document = tomllib.loads(text)
    except (ValueError, RecursionError) as error:
        _note_syntax(path.name, text, error, findings)
        return None
    if not document:
        findings.add(
            path.name, "is empty", do="write a campaign; `tapband start DIR` makes one to begin with"
        )
        return None
    return CampaignText(file=path.name, text=text, document=document, source_lines=_source_lines(text))


def read_text(path: Path, name: str, findings: Findings) -> str | None:
    """The text of a UTF-8 file with or without byte-order mark, None with its fault noted."""
    data = read_bytes(path, name, findings)
    if data is None:
        return None
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        note_encoding(data, error.start, name, findings)
        return None


def read_bytes(path: Path, name: str, findings: Findings) -> bytes | None:
    """The bytes of a file, None with its fault noted where there is none to read."""
    if not is_readable(path, name, findings):
        return None
    try:
        return path.read_bytes()
    except OSError as error:
        note_system(error, name, findings)
        return None


def note_system(error: OSError, name: str, findings: Findings) -> None:
    """Note what the system says of a file."""
    reason = (error.strerror or "no reason given").lower()
    findings.add(name, f"cannot be read ({reason})", do="check the file")


def is_readable(path: Path, name: str, findings: Findings, where: str = "") -> bool:
    """Whether a path is a file that is there; else its fault is noted, with the nearest name beside it.

    ``where`` is the place that names the file, if it is not asked for by name.
    """
    place, got = (where, shown(name)) if where else (name, "")
    try:
        if path.is_file():
            return True
        folder = path.is_dir()
        beside = sorted(os.listdir(path if folder else path.parent)) if path.parent.is_dir() else []
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        findings.add(
            where or "the file name", f"cannot be read ({reason.lower()})", shown(name), "check the name"
        )
        return False
    if folder:
        inside = next((file for file in beside if file.endswith(path.suffix or ".toml")), None)
        do = f"give {path / inside}" if inside and not where else "give the file inside it"
        findings.add(place if where else str(path), "must be a file", got or "a folder", do)
    elif path.exists():
        findings.add(place, "must be a plain file", got or "something else", "give a plain file")
    else:
        near = nearest(path.name, beside)
        do = f"did you mean {shown(near) if where else near}?" if near else "check the name"
        findings.add(place, "no such file", got, do)
    return False


def note_encoding(data: bytes, start: int, name: str, findings: Findings) -> None:
    """Note a file that is not UTF-8, at the first byte that is not."""
    if data[:2] in {b"\xff\xfe", b"\xfe\xff"}:
        findings.add(name, "must be UTF-8", "UTF-16", "save it as UTF-8")
        return
    line = data.count(b"\n", 0, start) + 1
    findings.add(f"{name}, line {line}", "must be UTF-8", f"the byte 0x{data[start]:02x}", "save it as UTF-8")


def _note_syntax(name: str, text: str, error: Exception, findings: Findings) -> None:
    """Note where the text stops being TOML."""
    reason, at = str(error), re.search(r" ?\(at (?:line (\d+), column (\d+)|end of document)\)", str(error))
    lines = text.splitlines() or [""]
    if isinstance(error, RecursionError):
        reason = "nested too deeply"
    if at is None:
        place, stood = name, ""
    elif at[1] is None:
        place, stood = f"{name}, end of file", lines[-1].strip()
    else:
        place = f"{name}, line {at[1]}, column {at[2]}"
        stood = lines[min(int(at[1]), len(lines)) - 1].strip()
    reason = re.sub(r" ?\(at .*\)", "", reason)
    rule = f"is not valid TOML ({reason[:1].lower() + reason[1:]})"
    findings.add(place, rule, stood, "correct the line")


def _source_lines(text: str) -> tuple[int, ...]:
    """Lines of the ``[[source]]`` headers, those inside multi-line texts left out."""
    header = re.compile(r"\s*\[\[\s*(source|\"source\"|'source')\s*\]\]")
    lines, inside = [], ""
    for number, line in enumerate(text.split("\n"), start=1):
        if not inside and header.match(line):
            lines.append(number)
        for mark in re.findall(r'"""|\'\'\'', line if inside or "#" not in line else line.split("#", 1)[0]):
            inside = "" if inside == mark else inside or mark
    return tuple(lines)
