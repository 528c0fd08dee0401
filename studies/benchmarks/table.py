"""Every benchmark in one run, as the rows of a table in Markdown.

python studies/benchmarks/table.py
"""

from __future__ import annotations

from collections.abc import Iterator

import accelerated
import linearised
import plain_trials
import ranking
import reading
import thousands

Row = tuple[str, str, str]


def rows() -> Iterator[Row]:
    """What was measured, found, and wanted."""
    yield from _linearised()
    yield from _trials()
    yield from _thousands()
    yield from _others()


def _linearised() -> Iterator[Row]:
    for name, one in linearised.compare().items():
        what = f"linearised, 200 points × 60 taps × 133 latents, over `uncertainties` ({name})"
        yield what, f"1/{1.0 / one.ratio:.0f}", "≤ 1/1000" if "hand" not in name else ""


def _trials() -> Iterator[Row]:
    one = plain_trials.compare()
    yield "a million plain trials over drawing their normals alone", f"{one.ratio:.2f}", "≤ 2.5"
    for trials, said in ((1_000_000, "10⁶"), (10_000_000, "10⁷")):
        yield f"peak memory of {said} plain trials", f"{plain_trials.peak(trials):.0f} MB", "< 300 MB"
    for name, sources in accelerated.BUDGETS.items():
        found = accelerated.compare(sources)
        what = f"accelerated over plain trials to the JCGM 101 tolerance, {name} budget"
        yield (
            what,
            f"1/{1.0 / found.times.ratio:.0f} ({found.trials} for {found.plain_trials:,} trials)",
            f"≤ 1/{1.0 / accelerated.LARGEST[name]:.0f}",
        )


def _thousands() -> Iterator[Row]:
    few = thousands.command(200)
    for name in thousands.IMPORTS:
        yield f"whole command, 200 points, over the imports {name}", f"{few.ratio(name):.1f}", "≤ 4"
    ran = thousands.computation(10_000)
    yield (
        "10,000 points × 60 taps, both propagators to the tolerance, two cores",
        f"{ran.processor:.0f} s of processor ({0.5 * ran.processor:.0f} s a core), {ran.peak:.0f} MB",
        "< 15 s",
    )
    many = thousands.command(10_000).command
    yield (
        "the same, whole command",
        f"{many.processor:.0f} s of processor, {many.peak:.0f} MB",
        "< 60 s, < 1 GB",
    )
    for name, power in thousands.growth().items():
        yield f"growth exponent in {name}", f"{power:.2f}", "≤ 1.1"


def _others() -> Iterator[Row]:
    one = reading.compare()
    yield "loading 10,000 rows × 60 taps over `pandas.read_csv`", f"{one.ratio:.1f}", ""
    record = reading.long_record()
    yield (
        f"peak memory of {record.table:.0f} MB of samples over the imports alone",
        f"{record.peak:.0f} MB over {record.imports:.0f} MB",
        "",
    )
    yield "ranking 200 points × 60 taps over the linearised reduction", f"{ranking.linear().ratio:.2f}", "≤ 2"
    found = ranking.indices()
    yield (
        "Sobol' indices of a point over SALib's of 4,096 base samples",
        f"1/{1.0 / found.times.ratio:.0f}, to ±{found.ours:.4f} for ±{found.theirs:.3f}",
        "",
    )


def main() -> None:
    """Print the table as it grows."""
    print("| measured (processor time, in one run) | found | wanted |\n|---|---|---|")
    for what, found, wanted in rows():
        print(f"| {what} | {found} | {wanted} |", flush=True)


if __name__ == "__main__":
    main()
