"""The folder of a campaign: opens the tables it names, remembers which, and hashes them."""

from __future__ import annotations

import hashlib
import os
from pathlib import Path

from tapband.files.faults import Findings
from tapband.files.tables import Table, open_table


class Folder:
    """A campaign's folder, the name of its file there, and what was found on the way."""

    def __init__(self, path: Path, file: str, findings: Findings) -> None:
        self.path, self.file, self.findings = path, file, findings
        self._used: dict[str, Path] = {file: path / file}

    def at(self, place: str) -> str:
        """A place in the campaign file, for a message."""
        return f"{self.file}, {place}"

    def table(self, name: str, place: str) -> Table | None:
        """The table of this name (relative to the folder), which ``place`` in the campaign file asks for."""
        path = self.path / name
        table = open_table(path, name, self.findings, self.at(place))
        if table is not None:
            self._used[Path(os.path.relpath(path, self.path)).as_posix()] = path
        return table

    def hashes(self) -> dict[str, str]:
        """SHA-256 of each file used, by its path relative to the folder."""
        return {name: _sha256(path) for name, path in self._used.items()}


def _sha256(path: Path) -> str:
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()
