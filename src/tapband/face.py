"""The Python face: load a campaign, reduce it, ask the results.

results = tapband.reduce(tapband.load("demo/campaign.toml"))
results.coefficients[["point", "cl", "cl_U"]]
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from tapband.files.load import load
from tapband.files.provenance import head, meta
from tapband.nouns.campaign import Campaign
from tapband.nouns.errors import QuestionError
from tapband.nouns.monte_carlo import seed_fault, trials_fault, trials_text
from tapband.nouns.plan import Polar
from tapband.questions.latents import Latents, from_arrays, latents_of, to_arrays
from tapband.questions.stated import full_latents
from tapband.reduction import Reduced, assemble, reduce_campaign
from tapband.report.plan_result import Plan
from tapband.report.plots import Plots

if TYPE_CHECKING:
    import pandas as pd
    from distributed import Client
    from uncertainties import UFloat

    from tapband.files.answers import Setting

__all__ = ["Campaign", "Plan", "Results", "forecast", "load", "reduce", "size"]

Array = NDArray[np.float64]
Progress = Callable[[int, int], None]


@dataclass(frozen=True, kw_only=True, eq=False)
class Results(Plots):
    """Tables, warnings and correlations of a reduced campaign.

    ``tables`` by file name without its ending; each is an attribute too. ``campaign`` is None for results
    that were read back from a folder.
    """

    tables: Mapping[str, pd.DataFrame]
    meta: Mapping[str, Any]
    arrays: Mapping[str, NDArray[Any]] = field(default_factory=dict)
    campaign: Campaign | None = None
    reduced: Reduced | None = None

    @property
    def coefficients(self) -> pd.DataFrame:
        """One row a point."""
        return self._table("coefficients")

    @property
    def cp(self) -> pd.DataFrame:
        """One row a point and tap."""
        return self._table("cp")

    @property
    def budget(self) -> pd.DataFrame:
        """One row a point, coefficient and source."""
        return self._table("budget")

    @property
    def correlation(self) -> pd.DataFrame:
        """One row a point and pair of coefficients."""
        return self._table("correlation")

    @property
    def ranking(self) -> pd.DataFrame:
        """One row a point, coefficient and group of sources."""
        return self._table("ranking")

    @property
    def tap_ranking(self) -> pd.DataFrame:
        """One row a point, coefficient and tap; made on demand where the campaign is too large to store it."""
        if "tap_ranking" not in self.tables and self.reduced is not None:
            from tapband.files.frames_rank import tap_rows

            return tap_rows(self.reduced)
        return self._table("tap_ranking")

    @property
    def wiring_comparison(self) -> pd.DataFrame:
        """One row a point, coefficient and source of tap pressure: the interval under four wirings."""
        if "wiring_comparison" not in self.tables and self.reduced is not None:
            from tapband.files.frames_rank import wiring_rows

            return wiring_rows(self.reduced)
        return self._table("wiring_comparison")

    @property
    def fits(self) -> pd.DataFrame:
        """One row a polar and fitted quantity."""
        return self._table("fits")

    @property
    def repeats(self) -> pd.DataFrame:
        """One row a repeated angle and coefficient: scatter against what changes between repeats."""
        return self._table("repeats")

    @property
    def regions(self) -> pd.DataFrame:
        """One row a point and pair of coefficients: the ellipse that holds both at the level."""
        return self._table("regions")

    @property
    def decisions(self) -> pd.DataFrame:
        """One row a point and limit: probability of conformity; meets, fails or undecided."""
        return self._table("decisions")

    @property
    def targets(self) -> pd.DataFrame:
        """One row a target and point that it names: half-width, target, and whether it is met."""
        return self._table("targets")

    @property
    def planned(self) -> pd.DataFrame:
        """One row a point and coefficient: the forecast's expanded uncertainty and the one achieved."""
        return self._table("planned")

    @property
    def warnings(self) -> tuple[str, ...]:
        """Everything the reader should know before quoting a number."""
        return tuple(self.meta.get("warnings", ()))

    @property
    def exit_status(self) -> int:
        """What the command line exits with: 1 where a target or decision fails or results are empty."""
        return int(self.meta.get("exit_status", 0))

    def _table(self, name: str) -> pd.DataFrame:
        if name not in self.tables:
            raise QuestionError(f"{name}: these results hold no such table; got {', '.join(self.tables)}")
        return self.tables[name]

    @cached_property
    def latents(self) -> Latents:
        """What correlates points."""
        return from_arrays(self.arrays) if self.reduced is None else full_latents(self.reduced.assembled)

    def covariance(self, a: str, b: str) -> pd.DataFrame:
        """Covariance of the coefficients of point ``a`` (rows) with those of ``b`` (columns), linearised."""
        import pandas as pd

        latents = self.latents
        names = list(latents.outputs)
        return pd.DataFrame(
            latents.covariance(latents.index(a), latents.index(b)), index=names, columns=names
        )

    def draws(self, *points: str, trials: int = 1000) -> pd.DataFrame:
        """Joint Monte Carlo draws of some points: a row a trial, columns by point and coefficient.

        What points share is drawn once and seen by all of them, so that differences, means and fits of the
        columns carry it. A trial that is refused is missing.
        """
        from tapband.files.answers import drawn_together

        if self.reduced is None:
            raise QuestionError("draws: need the campaign; got results read from a folder; reduce it again")
        return drawn_together(self.reduced.assembled, self.latents, points, trials)

    def compare(self, a: str, b: str, within: str | float | None = None) -> pd.DataFrame:
        """The difference ``a`` minus ``b`` of two points, runs or configs, with what they share cancelled.

        Runs and configs are paired at angles that are equal ``within`` a tolerance ("0.1 deg", or a number of
        degrees; default: that of the campaign), and interpolated where they are not. Notes are in ``attrs``.
        """
        from tapband.files.answers import compared

        return compared(self.latents, self._setting(), a, b, within)

    def fit(self, name: str, linear_range: tuple[str | float, str | float] | None = None) -> pd.DataFrame:
        """Fits of one run or config, over a linear range ("-4 deg", "6 deg") of your own; as in ``fits``."""
        from tapband.files.answers import fit_by_name

        asked = Polar() if self.campaign is None else self.campaign.plan.polar
        centre = float(self.meta.get("moment_centre", 0.25))
        return fit_by_name(self.latents, self._setting(), asked, name, linear_range, centre)

    def repeat(self, *points: str) -> pd.DataFrame:
        """Scatter of repeats that you name, against the sources that change between them."""
        from tapband.files.answers import repeats_by_name

        return repeats_by_name(self.latents, self._setting(), points)

    def _setting(self) -> Setting:
        from tapband.files.answers import Setting

        if self.reduced is not None:
            return Setting.of(self.reduced.assembled)
        return Setting(
            level=float(self.meta.get("level", 0.95)),
            seed=int(self.meta.get("seed", 1)),
            same_angle=float(np.radians(self.meta.get("same_angle", 0.1))),
            problem=None,
        )

    @cached_property
    def _variables(self) -> dict[tuple[str, int, int], UFloat]:
        return {}

    def ufloats(self, point: str) -> dict[str, UFloat]:
        """The coefficients of a point as ``uncertainties`` numbers, correlated across points too."""
        from uncertainties import ufloat

        latents = self.latents
        p = latents.index(point)
        numbers = {
            name: value + 0.0 * ufloat(0.0, 1.0)
            for name, value in zip(latents.outputs, latents.estimate[p].tolist(), strict=True)
        }
        for s, (source, codes) in enumerate(zip(latents.sources, latents.group, strict=True)):
            by_latent = latents.sensitivity[s][p]
            for g in np.flatnonzero(np.any(by_latent != 0.0, axis=0)).tolist():
                key = (source, g, int(codes[p]))
                variable = self._variables.setdefault(key, ufloat(0.0, 1.0, tag=source))
                for j, name in enumerate(latents.outputs):
                    if by_latent[j, g] != 0.0:
                        numbers[name] = numbers[name] + by_latent[j, g] * variable
        return numbers

    def rank(self, point: str, sobol: str | None = None) -> Results:
        """What drives one point, by source too; see the function of that name."""
        if self.campaign is None:
            raise QuestionError("rank: needs the campaign; got results read from a folder; reduce it again")
        return rank(self.campaign, point, sobol)

    def write(self, folder: str | Path, *, excel: bool = False, figures: str | None = None) -> Path:
        """Write every table, ``results.json`` and the report; whole or not at all."""
        from tapband.report.publish import publish

        publish(self, Path(folder), excel=excel, parquet=False, figures=figures)
        return Path(folder)

    @classmethod
    def read(cls, folder: str | Path) -> Results:
        """Results written before, with their correlations."""
        from tapband.files.read_results import read

        parts = read(folder)
        return cls(tables=parts.tables, meta=parts.meta, arrays=parts.arrays)

    def __repr__(self) -> str:
        """A short table of estimates and expanded uncertainties."""
        return f"tapband results: {self.meta.get('title', '')}\n{self._short().to_string(index=False)}"

    def _repr_html_(self) -> str:
        return str(self._short().to_html(index=False, escape=True))

    def _short(self) -> pd.DataFrame:
        table = self.coefficients
        wanted = ["point", "run", "alpha", "mach"]
        for name in ("cl", "cd_pressure", "cm"):
            wanted += [name, f"{name}_U", f"{name}_agrees"]
        return table[[name for name in wanted if name in table]].round(6)


def reduce(
    campaign: Campaign,
    trials: str | int | None = None,
    seed: int | None = None,
    progress: Progress | None = None,
    client: Client | None = None,
) -> Results:
    """The main job: coefficients with intervals by both propagators.

    ``trials`` "auto", a number, or "plain:N"; both default to the campaign's. ``progress`` is called with
    points done and points in all. ``client`` of a running Dask cluster spreads the points over its workers;
    the rows are the same.
    """
    reduced = reduce_campaign(_asked("reduce", campaign, trials, seed), progress=progress, client=client)
    return _results(reduced, "reduce")


def forecast(
    campaign: Campaign,
    progress: Progress | None = None,
    trials: str | int | None = None,
    seed: int | None = None,
    client: Client | None = None,
) -> Results:
    """Before a test: what its forecast expects, reduced as readings would be; marked as forecast everywhere."""
    from tapband.questions.forecasting import outlook

    plan = outlook(_asked("forecast", campaign, trials, seed)).campaign
    reduced = reduce_campaign(plan, progress=progress, client=client)
    return _results(reduced, "forecast")


def size(campaign: Campaign, progress: Callable[[float, float, str], None] | None = None) -> Plan:
    """Before a test: how good each source must be, the cheapest options, ranges, wiring, taps, averaging."""
    from tapband.questions.sizing import sized
    from tapband.report.plan_result import plan_of

    answers = sized(_asked("size", campaign), progress=progress)
    campaign = answers.basis.campaign
    return plan_of(answers, {**head(campaign), "warnings": list(campaign.warnings)})


def _asked(
    question: str, campaign: Campaign, trials: str | int | None = None, seed: int | None = None
) -> Campaign:
    """The campaign with the trials and the seed that are asked for; what cannot be asked is refused."""
    if not isinstance(campaign, Campaign):
        rule = f"{question}: takes a campaign"
        do = f'write tapband.{question}(tapband.load("campaign.toml"), ...)'
        raise QuestionError(f"{rule}; got {type(campaign).__name__}; {do}")
    trials = campaign.intervals.trials if trials is None else trials
    seed = campaign.intervals.seed if seed is None else seed
    for fault in (trials_fault(trials, "trials"), seed_fault(seed, "seed")):
        if fault is not None:
            raise QuestionError(str(fault))
    intervals = replace(campaign.intervals, trials=trials_text(trials), seed=int(seed))
    return replace(campaign, intervals=intervals)


def _results(reduced: Reduced, kind: str) -> Results:
    from tapband.files.answers import between
    from tapband.files.frames import frames
    from tapband.files.frames_plan import outcome_frames
    from tapband.files.frames_rank import rank_tables

    tables = frames(reduced)
    answers = between(reduced, tables)
    ranked, left_out = rank_tables(reduced)
    tables = tables | ranked | answers.tables
    planning, said, unmet = outcome_frames(reduced, forecast=kind == "forecast")
    if kind == "forecast":
        tables["cp"]["flag"] = [f"forecast; {flag}" if flag else kind for flag in tables["cp"]["flag"]]
    said_of = meta(reduced)
    targets = planning["targets"].to_dict("records") if "targets" in planning else []
    status = max(int(said_of["exit_status"]), int(unmet), int(answers.failed))
    warnings = [*said_of["warnings"], *said, *answers.warnings, *left_out]
    return Results(
        tables={**tables, **planning},
        meta={**said_of, "kind": kind, "warnings": warnings, "targets": targets, "exit_status": status},
        arrays=to_arrays(answers.latents),
        campaign=reduced.campaign,
        reduced=reduced,
    )


def rank(
    campaign: Campaign,
    point: str,
    sobol: str | None = None,
    trials: str | int | None = None,
    seed: int | None = None,
) -> Results:
    """What drives one point, POINT or RUN/POINT, without reducing the others.

    Tables ``ranking`` (by group), ``source_ranking``, ``tap_ranking``, ``wiring_comparison`` and, with more
    than 30 declared sources, ``screening``. ``sobol`` None: as many samples as are needed; "N" or "salib:N".
    """
    from tapband.files.frames import frames
    from tapband.files.frames_rank import point_tables
    from tapband.questions.rank_point import reduced_at

    campaign = _asked("rank", campaign, trials, seed)
    if campaign.points is None:
        raise QuestionError("rank: needs readings; got a campaign without them; add a table of points")
    reduced = reduced_at(campaign, point, campaign.intervals.trials, campaign.intervals.seed)
    return Results(
        tables={**frames(reduced), **point_tables(reduced, sobol)},
        meta={**meta(reduced), "kind": "rank"},
        arrays=to_arrays(latents_of(reduced)),
        campaign=reduced.campaign,
        reduced=reduced,
    )


def compare(
    campaign: Campaign,
    a: str,
    b: str,
    within: str | float | None = None,
    trials: str | int | None = None,
    seed: int | None = None,
) -> Results:
    """The table ``differences`` alone, without reducing the whole campaign; see :meth:`Results.compare`."""
    campaign = _asked("compare", campaign, trials, seed)
    if campaign.points is None:
        raise QuestionError("compare: needs readings; got a campaign without them; add a table of points")
    from tapband.files.answers import Setting, compared

    assembled = assemble(campaign)
    latents = full_latents(assembled)
    table = compared(latents, Setting.of(assembled), a, b, within)
    warnings = [*campaign.warnings, *assembled.warnings, *table.attrs["notes"]]
    return Results(
        tables={"differences": table},
        meta={**head(campaign), "kind": "compare", "warnings": warnings},
        arrays=to_arrays(latents),
        campaign=campaign,
    )
