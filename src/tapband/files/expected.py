"""The user's own table of expected pressure coefficients."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from tapband.files.contours import frozen
from tapband.files.faults import shown
from tapband.files.setting import Setting
from tapband.files.tables import Column, column_unit, need
from tapband.files.units import ANGLE, NUMBER
from tapband.nouns.plan import ExpectedTable


def read_expected(name: str, alpha: Sequence[float], setting: Setting) -> ExpectedTable | None:
    """The table, None with its faults noted. ``alpha`` [rad] are the angles it must reach."""
    findings, taps = setting.folder.findings, setting.taps
    before = len(findings)
    table = setting.folder.table(name, "forecast.pressures")
    if table is None or taps is None:
        return None
    angle = need(table, "alpha", findings)
    if angle is None:
        return None
    columns: list[Column] = []
    at: list[int] = []
    for i, (tap, dead) in enumerate(zip(taps.names, taps.excluded.tolist(), strict=True)):
        column = (
            table.column(tap)
            if dead
            else need(table, tap, findings, f"a tap of {taps.table.file}", taps.names)
        )
        if column is not None:
            columns.append(column)
            at.append(i)
            column_unit(table, column, NUMBER, findings)
    unit = column_unit(table, angle, ANGLE, findings)
    blocks = list(table.blocks([c.index for c in (angle, *columns)], (), findings))
    if not blocks:
        findings.add(table.file, "must have at least one row", "none", "add a row for each angle")
        return None
    numbers = np.concatenate([block.numbers for block in blocks])
    lines = np.concatenate([block.lines for block in blocks])
    dead = np.array([False, *(bool(taps.excluded[i]) for i in at)])
    for row, column_at in np.argwhere(np.isnan(numbers) & ~dead):
        what = (angle, *columns)[column_at].name
        findings.add(
            table.at(int(lines[row]), what), "must be given at every angle", "nothing", "write the number",
            kind=table.of(what),
        )  # fmt: skip
    angles = unit.factor * numbers[:, 0]
    if len(findings) == before:
        _check_angles(angles, numbers[:, 0], alpha, name, setting)
    if len(findings) > before:
        return None
    order = np.argsort(angles)
    cp = np.full((angles.size, len(taps.names)), np.nan)
    cp[:, at] = numbers[:, 1:]
    return ExpectedTable(alpha=frozen(angles[order]), cp=frozen(cp[order]))


def _check_angles(
    angles: np.ndarray[tuple[int, ...], np.dtype[np.float64]],
    stated: np.ndarray[tuple[int, ...], np.dtype[np.float64]],
    alpha: Sequence[float], name: str, setting: Setting,
) -> None:  # fmt: skip
    """Each angle is there once, and those asked for lie between them."""
    findings = setting.folder.findings
    values, counts = np.unique(angles, return_counts=True)
    for value in values[counts > 1]:
        twice = stated[np.flatnonzero(angles == value)[0]]
        findings.add(
            f"{name}, column alpha", "must hold each angle once", f"{twice:g} twice", "remove one row"
        )
    slack = 1e-9
    for i, angle in enumerate(alpha):
        if np.isfinite(angle) and not values[0] - slack <= angle <= values[-1] + slack:
            got = shown(f"{np.degrees(angle):g} deg")
            span = f"{np.degrees(values[0]):g} to {np.degrees(values[-1]):g} deg"
            findings.add(
                setting.folder.at(f"forecast.alpha[{i + 1}]"),
                f"must lie within the angles of {name} ({span})", got, "remove the angle or extend the table",
            )  # fmt: skip
