"""All arrangements of readings and stream, what may be acted on in each, and all ways to share an error."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from bad_input_corpus import GOOD, good
from tapband.files.acts import ACTS, Arrangement
from tapband.files.load import load
from tapband.nouns.campaign import COEFFICIENT, STATIC, STREAM_CHANNELS, TOTAL, VACUUM, Campaign
from tapband.nouns.errors import InputError
from tapband.nouns.source import COMMON, INDEPENDENT, Source

TOML = "campaign.toml"
HEAD = """
format = 1
[section]
contour = "contour.csv"
chord = "400 mm"
[taps]
table = "taps.csv"
[readings]
table = "points.csv"
pressures = "{pressures}"
[stream]
from = "{stream}"
"""
COLUMNS = {
    "p_total [Pa]": 101500,
    "p_static [Pa]": 100000,
    "p_difference [Pa]": 1500,
    "q [Pa]": 1492,
    "mach": 0.146,
}
ALL = [(pressures, stream) for pressures in (STATIC, TOTAL, VACUUM, "relative to p_ref", COEFFICIENT)
       for stream in STREAM_CHANNELS if stream != "mach" or pressures == COEFFICIENT]  # fmt: skip


def campaign_of(folder: Path, pressures: str, stream: str, sources: str = "") -> Campaign:
    """A campaign with exactly the columns that an arrangement needs."""
    campaign = good(folder)
    campaign.write_text(HEAD.format(pressures=pressures, stream=stream) + sources)
    relative = "p_ref" if pressures == "relative to p_ref" else pressures
    arrangement = Arrangement(pressures=relative, stream=stream)
    unit = "" if pressures == COEFFICIENT else " [Pa]"
    names = [line.split(",")[0] for line in (GOOD / "taps.csv").read_text().splitlines()[1:]]
    cells = {"point": "a", "alpha [deg]": "2"}
    cells |= {
        head: str(value) for head, value in COLUMNS.items() if head.split(" ")[0] in arrangement.columns
    }
    cells |= {"p_ref [Pa]": "99000"} if arrangement.reference else {}
    cells |= {name + unit: "-0.4" for name in names}
    (folder / "points.csv").write_text(",".join(cells) + "\n" + ",".join(cells.values()) + "\n")
    return load(campaign)


@pytest.mark.parametrize(("pressures", "stream"), ALL)
def test_arrangement_needs_its_columns_and_no_more(pressures: str, stream: str, tmp_path: Path) -> None:
    campaign = campaign_of(tmp_path, pressures, stream)
    assert campaign.points is not None
    wanted = set(STREAM_CHANNELS[stream])
    if stream == "dynamic and mach" and pressures in {VACUUM, "relative to p_ref"}:
        wanted.add("p_static")
    if pressures == "relative to p_ref":
        wanted.add("p_ref")
        assert campaign.pressures == "p_ref"
    else:
        assert campaign.pressures == pressures
    assert set(campaign.points.channels) == wanted
    assert campaign.stream == stream


def _acting(act: str) -> str:
    taps = 'across_taps = "independent"\n' if ACTS[act].taps else ""
    unit = {"pressure": " Pa", "angle": " deg", "length": " mm"}.get(ACTS[act].dimension, "")
    head = f'[[source]]\nname = "s"\nacts_on = "{act}"\nacross_points = "common"\n'
    return f'{head}standard = "0.001{unit}"\n{taps}'


@pytest.mark.parametrize(("pressures", "stream"), ALL)
def test_acts_are_legal_exactly_where_there_is_something_to_act_on(
    pressures: str, stream: str, tmp_path: Path
) -> None:
    channels = {
        "total pressure": "p_total",
        "static pressure": "p_static",
        "pressure difference": "p_difference",
    }
    reads = campaign_of(tmp_path, pressures, stream)
    assert reads.points is not None
    for act in ACTS:
        legal = channels[act] in reads.points.channels if act in channels else True
        legal &= act != "reference pressure" or pressures == "relative to p_ref"
        legal &= act != "tap pressure" or pressures != COEFFICIENT
        legal &= act != "dynamic pressure" or stream != "mach"
        if legal:
            assert campaign_of(tmp_path, pressures, stream, _acting(act)).sources[0].acts_on == (act,)
        else:
            with pytest.raises(InputError, match="has nothing to act on"):
                campaign_of(tmp_path, pressures, stream, _acting(act))


def sources_of(folder: Path, *changes: tuple[str, str, str]) -> dict[str, Source]:
    """Sources of the good campaign after changes, by name."""
    return {source.name: source for source in load(good(folder, *changes)).sources}


@pytest.mark.parametrize(
    ("stated", "found"),
    [
        ("independent", INDEPENDENT),
        ("common", COMMON),
        ("by run", "run"),
        ("by config", "config"),
        ("by point", "point"),
    ],
)
def test_points_share_as_stated(stated: str, found: str, tmp_path: Path) -> None:
    source = sources_of(tmp_path, (TOML, 'across_points = "by run"', f'across_points = "{stated}"'))[
        "module zero"
    ]
    assert source.across_points == found
    assert source.systematic == (stated != "independent")


@pytest.mark.parametrize(("stated", "found"), [("independent", INDEPENDENT), ("common", COMMON),
                                               ("by module", "module"), ("by surface", "surface"),
                                               ("by hole", "hole")])  # fmt: skip
def test_taps_share_as_stated(stated: str, found: str, tmp_path: Path) -> None:
    source = sources_of(tmp_path, (TOML, 'across_taps = "by module"', f'across_taps = "{stated}"'))[
        "module zero"
    ]
    assert source.across_taps == found


def test_tap_row_is_one_shift_and_needs_no_sharing(tmp_path: Path) -> None:
    plain = (
        TOML,
        'acts_on = "static pressure"\nexpanded = "30 Pa"',
        'acts_on = "tap row"\nexpanded = "0.1 mm"',
    )
    stated = (TOML, plain[1], plain[2] + '\nacross_taps = "common"')
    for change in (plain, stated):
        assert sources_of(tmp_path, change)["static pressure"].across_taps == ""
    with pytest.raises(InputError, match="one shift of all taps"):
        sources_of(tmp_path, (TOML, plain[1], plain[2] + '\nacross_taps = "by module"'))


def test_list_of_acts_is_one_error_in_several_places(tmp_path: Path) -> None:
    change = (TOML, 'acts_on = "static pressure"', 'acts_on = ["static pressure", "total pressure"]')
    assert sources_of(tmp_path, change)["static pressure"].acts_on == ("static pressure", "total pressure")


def test_list_by_module_takes_a_channel_on_a_module(tmp_path: Path) -> None:
    changes = (
        (TOML, 'p_total = { module = "M1" }', 'p_total = { module = "M1" }\np_static = { module = "M2" }'),
        (TOML, 'acts_on = "tap pressure"\nlimits = "0.03 % of full scale"',
         'acts_on = ["tap pressure", "static pressure"]\nlimits = "3 Pa"'),
    )  # fmt: skip
    assert sources_of(tmp_path, *changes)["module zero"].across_taps == "module"


def test_channel_takes_the_full_scale_its_module_has(tmp_path: Path) -> None:
    channel = load(good(tmp_path)).channels["p_total"]
    assert (dict(channel.columns), channel.full_scale) == ({"module": "M1"}, 7000.0)


def test_channel_may_state_full_scale_and_other_groups(tmp_path: Path) -> None:
    change = (TOML, '{ module = "M1" }', '{ module = "M1", full_scale = "1 bar", surface = "upper" }')
    channel = load(good(tmp_path, change)).channels["p_total"]
    assert dict(channel.columns) == {"module": "M1", "surface": "upper"}
    assert channel.full_scale == 1e5


def test_channel_on_a_module_without_taps_is_a_warning(tmp_path: Path) -> None:
    change = (TOML, '{ module = "M1" }', '{ module = "M9", full_scale = "7 kPa" }')
    assert load(good(tmp_path, change)).warnings == (
        'campaign.toml, stream.channels.p_total: no tap has module "M9", so it shares no error by module',
    )


@pytest.mark.parametrize(
    ("changes", "warning"),
    [
        (
            [
                (
                    TOML,
                    'acts_on = "static pressure"\nexpanded = "30',
                    'acts_on = "chord"\nexpanded = "0.1 mm" # ',
                )
            ],
            'source "static pressure" acts on the Reynolds number alone: contour and taps are stated in '
            "fractions of the chord",
        ),
        (
            [(TOML, 'across_points = "by run"', 'across_points = "independent"')],
            "points have samples, whose scatter is counted; noise from point to point declared beside them "
            'is counted twice: "module zero"',
        ),
        (
            [(TOML, 'expanded = "30 Pa"', 'full_scale = "7 kPa"\nexpanded = "0.1 % of reading"')],
            'source "static pressure" is per cent of the reading, and static pressure readings stand in the '
            "table as absolute pressures beyond the full scale: a gauge instrument reads the difference from "
            "its reference; state the size per cent of full scale, or give gauge readings",
        ),
        (
            [(TOML, 'integration = "contour-cubic"', "reference_mach = 0.3")],
            "reduction.reference_mach has no effect: no compressibility rule is chosen",
        ),
        (
            [(TOML, '"angle"\nstandard = "0.03 deg"', '"trailing-edge coefficient"\nstandard = 0.1')],
            "reduction.trailing_edge.standard is set aside: a declared source acts on the trailing-edge "
            "coefficient",
        ),
    ],
)
def test_what_is_legal_and_seldom_meant_draws_a_warning(
    changes: list[tuple[str, str, str]], warning: str, tmp_path: Path
) -> None:
    assert load(good(tmp_path, *changes)).warnings == (warning,)


def test_contour_that_does_not_fit_its_chord_draws_a_warning(tmp_path: Path) -> None:
    changes = ((TOML, 'chord = "400 mm"', 'chord = "420 mm"'), ("contour.csv", "x,y", "x [mm],y [mm]"))
    campaign = good(tmp_path, *changes, ("taps.csv", "U06,upper,0.92", "U06,upper,0.90"))
    _in_millimetres(tmp_path / "contour.csv")
    warnings = load(campaign).warnings
    assert warnings == ("contour.csv: the contour spans 0.952 chords; see whether section.chord is right",)


def _in_millimetres(path: Path) -> None:
    head, *rows = [line for line in path.read_text().splitlines() if not line.startswith("#")]
    points = 400.0 * np.array([[float(cell) for cell in row.split(",")] for row in rows])
    path.write_text("\n".join([head, *(f"{x:.6f},{y:.6f}" for x, y in points)]))
