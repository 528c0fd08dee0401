"""Plans as tables: the columns that leave the program, SI units, angles in degrees."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from tapband.nouns.campaign import COEFFICIENT
from tapband.nouns.errors import QuestionError
from tapband.questions.averaging import Averaging
from tapband.questions.choice import FrontierSet
from tapband.questions.layout import LayoutChoice
from tapband.questions.planned import Comparison, Scores, comparison, scores, why_not_compared
from tapband.questions.sizing import Sized
from tapband.questions.targets import Demands
from tapband.questions.wiring_choice import WiringChoice
from tapband.reduction import Reduced

Array = NDArray[np.float64]


def plan_frames(sized: Sized) -> dict[str, pd.DataFrame]:
    """Every table of a plan by file name without its ending."""
    tables = {
        "targets": _target_rows(
            sized.basis.demands, sized.declared.headline, sized.met, sized.basis.raw.names, sized.basis.raw.runs,
            sized.basis.assembled.problem.outputs,
        ),
        "allowances": allowance_table(sized),
    }  # fmt: skip
    if sized.choices is not None:
        tables["selection"] = selection_table(sized)
        tables["options"] = option_table(sized)
        tables["frontier"] = frontier_table(sized)
    tables["ranges"] = range_table(sized)
    if sized.wiring is not None:
        tables["wiring"], tables["wirings"] = wiring_tables(sized, sized.wiring)
    if sized.layout is not None:
        tables["layout"], tables["layouts"] = layout_tables(sized.layout)
    if sized.averaging is not None:
        tables["averaging"] = averaging_table(sized, sized.averaging)
    return tables


def outcome_frames(
    reduced: Reduced, *, forecast: bool = False
) -> tuple[dict[str, pd.DataFrame], tuple[str, ...], bool]:
    """What a reduction says of the plan: tables targets and planned where asked for, warnings, any target unmet."""
    tables: dict[str, pd.DataFrame] = {}
    unmet = False
    if reduced.campaign.plan.targets:
        found = scores(reduced)
        tables["targets"] = target_table(reduced, found)
        unmet = not bool(np.all(found.met))
    if not forecast:
        try:
            both = comparison(reduced)
        except QuestionError as error:
            return tables, (why_not_compared(error),), unmet
        if both is not None:
            tables["planned"] = planned_table(reduced, both)
    return tables, (), unmet


def target_table(reduced: Reduced, scores: Scores) -> pd.DataFrame:
    """One row a target and point that it names."""
    points = reduced.assembled.points
    return _target_rows(
        scores.demands, scores.expanded, scores.met, points.names, points.runs, reduced.outputs
    )


def _target_rows(
    demands: Demands, expanded: Array, met: NDArray[np.bool_], names: Sequence[str], runs: Sequence[str],
    outputs: Sequence[str],
) -> pd.DataFrame:  # fmt: skip
    return pd.DataFrame(
        {
            "point": [names[p] for p in demands.point],
            "run": [runs[p] for p in demands.point],
            "coefficient": [outputs[j] for j in demands.output],
            "U": expanded,
            "target": demands.limit,
            "ratio": expanded / demands.limit,
            "met": np.where(met, "yes", "no").astype(object),
        }
    )


def planned_table(reduced: Reduced, comparison: Comparison) -> pd.DataFrame:
    """One row a point and coefficient: linearised expanded uncertainty, forecast and achieved."""
    points = reduced.assembled.points
    count, outputs = len(points.names), len(comparison.outputs)
    planned, achieved = comparison.planned.ravel(), comparison.achieved.ravel()
    with np.errstate(divide="ignore", invalid="ignore"):
        ratio = achieved / planned
    return pd.DataFrame(
        {
            "point": np.repeat(np.array(points.names, dtype=object), outputs),
            "run": np.repeat(np.array(points.runs, dtype=object), outputs),
            "alpha": np.repeat(np.degrees(points.alpha), outputs),
            "coefficient": np.tile(np.array(comparison.outputs, dtype=object), count),
            "planned_U": planned,
            "achieved_U": achieved,
            "ratio": ratio,
        }
    )


def allowance_table(sized: Sized) -> pd.DataFrame:
    """One row a declared source; ``allowed`` is empty where even zero fails, infinite where nothing depends on it.

    ``equal_contribution`` and ``least_cost`` are its sizes in the two allocations of all sources together.
    """
    allowed, demands = sized.allowances, sized.basis.demands
    outputs = sized.basis.assembled.problem.outputs
    declared = np.array([a.declared for a in allowed], dtype=np.float64)

    def binding(values: Sequence[str], index: NDArray[np.int64]) -> list[str]:
        return ["" if a.demand is None else values[index[a.demand]] for a in allowed]

    table = pd.DataFrame(
        {
            "source": [a.source for a in allowed],
            "declared": declared,
            "allowed": np.array(
                [np.nan if a.allowed is None else a.allowed for a in allowed], dtype=np.float64
            ),
            "unit": [a.unit for a in allowed],
            "headroom": np.array(
                [np.nan if a.factor is None else a.factor for a in allowed], dtype=np.float64
            ),
            "binding_point": binding(sized.basis.raw.keys, demands.point),
            "binding_coefficient": binding(outputs, demands.output),
            "equal_contribution": declared * sized.allocation.equal,
            "least_cost": declared * sized.allocation.least_cost,
            "reason": [a.reason for a in allowed],
        }
    )
    table.attrs["units"] = {"equal_contribution": "by row", "least_cost": "by row"}
    return table


def selection_table(sized: Sized) -> pd.DataFrame:
    """One row a slot; no rows where no choice meets the targets."""
    assert sized.choices is not None
    assert sized.selection is not None
    choice = sized.selection.choice
    chosen = () if choice is None else choice.chosen
    options = [sized.choices.options[j] for j in chosen]
    return pd.DataFrame(
        {
            "slot": [slot.name for slot, _ in zip(sized.choices.slots, options, strict=bool(options))],
            "option": [option.name for option in options],
            "cost": np.array([option.cost for option in options], dtype=np.float64),
        }
    )


def option_table(sized: Sized) -> pd.DataFrame:
    """One row an option: whether its full scale holds the readings, and whether it is chosen."""
    assert sized.choices is not None
    assert sized.selection is not None
    choices, choice = sized.choices, sized.selection.choice
    chosen = set() if choice is None else set(choice.chosen)
    scales = [np.nan if option.full_scale is None else option.full_scale for option in choices.options]
    reasons = [
        "" if not past else str(past[0]) + (f" ({len(past) - 1} channels more)" if len(past) > 1 else "")
        for past in choices.saturated
    ]
    return pd.DataFrame(
        {
            "slot": [choices.slots[slot].name for slot in choices.catalogue.slot],
            "option": [option.name for option in choices.options],
            "cost": choices.catalogue.cost,
            "full_scale": scales,
            "eligible": np.where(choices.catalogue.eligible, "yes", "no").astype(object),
            "chosen": ["yes" if j in chosen else "no" for j in range(len(choices.options))],
            "reason": reasons,
        }
    )


def frontier_table(sized: Sized) -> pd.DataFrame:
    """One row an efficient set, cheapest first: its cost, largest ratio of U to target, and its options."""
    assert sized.choices is not None
    choices, found = sized.choices, sized.frontier

    def option(one: FrontierSet, slot: int) -> str:
        return choices.options[one.chosen[slot]].name

    columns: dict[str, object] = {
        "cost": np.array([one.cost for one in found], dtype=np.float64),
        "worst_ratio": np.array([one.worst for one in found], dtype=np.float64),
    }
    for i, slot in enumerate(choices.slots):
        name = f"slot {slot.name}" if slot.name in columns else slot.name
        columns[name] = [option(one, i) for one in found]
    columns["linearised ratio"] = np.array([one.linear for one in found], dtype=np.float64)
    return pd.DataFrame(columns)


def range_table(sized: Sized) -> pd.DataFrame:
    """One row a tap in use, then one a pressure of the stream."""
    seen = sized.ranges
    used = np.flatnonzero(np.isfinite(seen.lowest))
    past = seen.utilisation[used] > 1.0
    table = pd.DataFrame(
        {
            "tap": [seen.names[i] for i in used],
            "lowest": seen.lowest[used],
            "highest": seen.highest[used],
            "full_scale": seen.full_scale[used],
            "utilisation": seen.utilisation[used],
            "expected_lowest": seen.expected_lowest[used],
            "expected_highest": seen.expected_highest[used],
            "saturates": np.where(past, "yes", np.where(np.isnan(seen.full_scale[used]), "", "no")).astype(
                object
            ),
        }
    )
    unit = "1" if sized.basis.campaign.pressures == COEFFICIENT else "Pa"
    ends = ("lowest", "highest", "expected_lowest", "expected_highest")
    table.attrs["units"] = dict.fromkeys(ends, unit)
    return table


def wiring_tables(sized: Sized, choice: WiringChoice) -> tuple[pd.DataFrame, pd.DataFrame]:
    """The wiring found, one row a tap (no module where the tap is not used); and all wirings judged."""
    module = [""] * len(sized.basis.campaign.taps.names)
    for tap, g in zip(choice.taps.tolist(), choice.found.module.tolist(), strict=True):
        module[tap] = choice.modules[g]
    found = pd.DataFrame({"tap": list(sized.basis.campaign.taps.names), "module": module})
    demands, outputs = sized.basis.demands, sized.basis.assembled.problem.outputs
    judged = pd.DataFrame(
        {
            "wiring": [one.name for one in choice.wirings],
            "worst_ratio": np.array([one.worst for one in choice.wirings], dtype=np.float64),
            "binding_point": [sized.basis.raw.keys[demands.point[one.demand]] for one in choice.wirings],
            "binding_coefficient": [outputs[demands.output[one.demand]] for one in choice.wirings],
        }
    )
    return found, judged


def layout_tables(choice: LayoutChoice) -> tuple[pd.DataFrame, pd.DataFrame]:
    """The layout found, one row a tap; and all layouts judged, one row a number of taps and kind."""
    found = pd.DataFrame(
        {
            "tap": list(choice.names),
            "surface": np.where(choice.s >= 0.0, "upper", "lower").astype(object),
            "x": choice.x,
            "y": choice.y,
            "s": choice.s,
        }
    )
    found.attrs["units"] = {"s": "chord"}
    judged = pd.DataFrame(
        {
            "taps": [one.taps for one in choice.judged],
            "layout": [one.layout for one in choice.judged],
            "worst_ratio": np.array([one.interval for one in choice.judged], dtype=np.float64),
            "rms_error_ratio": np.array([one.error for one in choice.judged], dtype=np.float64),
        }
    )
    return found, judged.sort_values(["taps", "layout"], kind="stable", ignore_index=True)


def averaging_table(sized: Sized, found: Averaging) -> pd.DataFrame:
    """One row a target and point: what the fluctuation makes of it, and how long to average."""
    basis = sized.basis
    demands, points = basis.demands, basis.raw
    table = pd.DataFrame(
        {
            "point": [points.names[p] for p in demands.point],
            "run": [points.runs[p] for p in demands.point],
            "coefficient": [basis.assembled.problem.outputs[j] for j in demands.output],
            "u_single": found.single,
            "u_single_bound": found.bound,
            "effective_samples": np.full(found.single.size, found.effective),
            "u_mean": found.mean,
            "record_needed": found.record,
            "samples_needed": np.ceil(found.record / (2.0 * found.time_scale)),
            "difference": demands.limit,
            "repeats_needed": found.repeats,
        }
    )
    table.attrs["units"] = {"record_needed": "s"}
    return table
