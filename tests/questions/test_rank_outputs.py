"""Rankings as people meet them: tables of a reduction, the command, the figures."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import matplotlib as mpl
import numpy as np
import pandas as pd
import pytest
from matplotlib.figure import Figure

from campaigns import TWELVE, campaign, every_kind
from tapband import face
from tapband.cli import main
from tapband.face import Results
from tapband.files import frames_rank
from tapband.files.write_columns import ORDER
from tapband.files.write_tables import csv_text
from tapband.nouns.errors import QuestionError
from tapband.questions.rank_taps import NOT_AT_A_TAP
from tapband.report.figures_rank import groups, taps_on_section

WIDTH = 80


@pytest.fixture(scope="module")
def results() -> Results:
    of = campaign(
        every_kind(), taps=TWELVE.taps(21, "cosine", 0.97), alphas=(-2.0, 3.0, 7.0), lost={(1, 4): True}
    )
    return face.reduce(of, trials=2000)


@pytest.fixture(scope="module")
def starter(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("starter") / "demo"
    assert main(["start", str(folder), "--quiet"]) == 0
    return folder / "campaign.toml"


@pytest.mark.parametrize("name", ["ranking", "tap_ranking"])
def test_tables_begin_with_the_columns_that_are_fixed(results: Results, name: str) -> None:
    header = csv_text(name, results.tables[name]).splitlines()[0].split(",")
    assert tuple(header[: len(ORDER[name])]) == ORDER[name]


def test_shares_in_the_tables_sum_to_one(results: Results) -> None:
    for frame, column in ((results.ranking, "linear_share"), (results.tap_ranking, "share")):
        sums = frame.groupby(["run", "point", "coefficient"])[column].sum()
        np.testing.assert_allclose(sums, 1.0, rtol=0.0, atol=1e-9)


def test_every_tap_has_a_row_and_what_is_not_at_a_tap_has_one_without_place_or_weight(
    results: Results,
) -> None:
    rows = results.tap_ranking
    rows = rows[(rows["point"] == "P2") & (rows["coefficient"] == "cm")]
    assert rows["tap"].tolist() == [f"T{i:02d}" for i in range(1, 22)] + [NOT_AT_A_TAP]
    assert rows.iloc[-1][["x", "y", "weight", "if_lost"]].isna().all()
    lost = rows.iloc[4]
    assert (lost["weight"], lost["share"], lost["if_lost"]) == (0.0, 0.0, 0.0)
    # Live taps come first, then the lost one, then the row that is no tap.
    assert sorted(rows["rank"])[-2:] == [21, 22]
    assert rows.iloc[-1]["rank"] == 22


def test_ranking_agrees_with_the_budget(results: Results) -> None:
    budget = results.budget.groupby(["run", "point", "coefficient", "group"])["share"].sum()
    share = results.ranking.set_index(["run", "point", "coefficient", "group"])["linear_share"]
    pd.testing.assert_series_equal(
        share.sort_index(), budget.sort_index(), check_names=False, rtol=1e-12, atol=1e-15
    )


def test_the_same_reduction_gives_the_same_rankings_to_the_last_digit(results: Results) -> None:
    again = face.reduce(results.campaign, trials=2000) if results.campaign else results
    for name in ("ranking", "tap_ranking", "wiring_comparison"):
        pd.testing.assert_frame_equal(again.tables[name], results.tables[name], check_exact=True)


def test_a_very_large_campaign_leaves_out_what_rank_gives_and_says_so(
    results: Results, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(frames_rank, "INDEXED", 2)
    monkeypatch.setattr(frames_rank, "ROWS", 100)
    assert results.campaign is not None
    large = face.reduce(results.campaign, trials=2000)
    assert "tap_ranking" not in large.tables
    assert large.ranking["total"].isna().all()
    np.testing.assert_array_equal(large.ranking["linear_share"], results.ranking["linear_share"])
    assert large.warnings[-2:] == (
        "ranking.csv: 3 points are too many for Sobol' indices; tapband rank gives them point by point",
        "tap_ranking.csv, wiring_comparison.csv: left out (330 rows); tapband rank gives them point by point",
    )
    pd.testing.assert_frame_equal(large.tap_ranking, results.tap_ranking)
    pd.testing.assert_frame_equal(large.wiring_comparison, results.wiring_comparison)


def test_one_point_ranked_alone_has_the_rows_of_the_whole_campaign(results: Results) -> None:
    assert results.campaign is not None
    alone = results.rank("P2")
    for name in ("ranking", "tap_ranking", "wiring_comparison"):
        whole = results.tables[name]
        whole = whole[whole["point"] == "P2"].reset_index(drop=True)
        # Products with another number of rows may round otherwise.
        pd.testing.assert_frame_equal(alone.tables[name], whole, check_exact=False, rtol=1e-9, atol=1e-13)
    assert set(alone.tables["source_ranking"]["group"]) == set(results.budget["source"])


def run(arguments: list[str], capsys: pytest.CaptureFixture[str]) -> str:
    assert main(arguments) == 0
    return capsys.readouterr().out


def test_the_command_says_what_drives_a_point_in_80_columns(
    starter: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    shown = run(["rank", str(starter), "--point", "R1/P05", "--trials", "2000"], capsys)
    assert max(len(line) for line in shown.splitlines()) <= WIDTH
    for words in (
        "what drives R1/P05",
        "cl = ",
        "cd_pressure = ",
        "cm = ",
        "halved",
        "removed",
        "if lost",
        "interleaved",
    ):
        assert words in shown
    assert "taps: " in shown
    assert "90 % of that at" in shown


def test_the_command_takes_one_coefficient_and_salib(
    starter: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    arguments = [
        "rank",
        str(starter),
        "--point",
        "R1/P05",
        "--coefficient",
        "cm",
        "--sobol",
        "salib:16",
        "--trials",
        "2000",
    ]
    shown = run(arguments, capsys)
    assert "cm = " in shown
    assert "cl = " not in shown


def test_a_quiet_command_says_nothing(starter: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["rank", str(starter), "--point", "R1/P05", "--trials", "2000", "--quiet"], capsys) == ""


POWER = "--sobol: must be a power of two, alone or after salib:"
MISTAKES = [
    (["--point", "P99"], 'point "P99": must be a point of the campaign; got none of that name; try '),
    (
        ["--point", "R1/P05", "--sobol", "salib:100"],
        f'{POWER}; got "salib:100"; write --sobol 256 or salib:1024',
    ),
    (["--point", "R1/P05", "--sobol", "many"], f'{POWER}; got "many"; write --sobol 256 or salib:1024'),
    (
        ["--point", "R1/P05", "--coefficient", "cz"],
        '--coefficient: must be a coefficient of the campaign; got "cz"',
    ),
    ([], "tapband rank: Missing option '--point'"),
]


@pytest.mark.parametrize(("more", "message"), MISTAKES)
def test_mistakes_are_answered_with_one_line(
    starter: Path, more: list[str], message: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["rank", str(starter), "--trials", "2000", *more]) == 2
    error = capsys.readouterr().err
    assert error.startswith(message)
    assert len(error.splitlines()) == 1


def test_every_figure_draws_on_the_axes_it_is_given(results: Results) -> None:
    for name, draw in (
        ("groups", lambda ax: results.plot_groups("cl", "P2", ax=ax)),
        ("section", lambda ax: results.plot_taps_on_section("cd_pressure", "P2", ax=ax)),
        ("chord", lambda ax: results.plot_taps_along_chord("cd_pressure", "R1/P2", ax=ax)),
        ("shares", lambda ax: results.plot_shares("cm", ax=ax)),
        ("drivers", lambda ax: results.plot_drivers(ax=ax)),
        ("wiring", lambda ax: results.plot_wiring("cl", "P2", ax=ax)),
        ("one wiring", lambda ax: results.plot_wiring("cl", "P2", "module zero", ax=ax)),
    ):
        figure = Figure()
        ax = figure.add_subplot()
        assert draw(ax) is ax, name
        assert ax.get_title(loc="left"), name
        figure.canvas.draw()


def test_figures_leave_no_style_behind(results: Results) -> None:
    before = dict(mpl.rcParams)
    results.plot_drivers()
    assert dict(mpl.rcParams) == before


def test_a_bar_on_the_section_is_as_long_as_its_share(results: Results) -> None:
    ax = taps_on_section(results, "cl", "P2")
    rows = results.tap_ranking
    rows = rows[(rows["point"] == "P2") & (rows["coefficient"] == "cl")].iloc[:-1]
    bars = [line for line in ax.lines if len(line.get_xdata()) == 2]
    lengths = sorted(float(np.hypot(np.ptp(bar.get_xdata()), np.ptp(bar.get_ydata()))) for bar in bars)
    share = np.abs(rows["share"].to_numpy())
    np.testing.assert_allclose(lengths, sorted(0.28 * share[share > 0.0] / share.max()), atol=1e-12)


def test_marks_of_groups_stand_at_their_indices(results: Results) -> None:
    ax = groups(results, "cl", "P3")
    shown = sorted(bar.get_width() for bar in ax.patches)
    rows = results.ranking
    rows = rows[(rows["point"] == "P3") & (rows["coefficient"] == "cl")].sort_values("rank").head(len(shown))
    np.testing.assert_allclose(shown, sorted(100 * rows["linear_share"]))


def test_a_figure_of_nothing_says_what_to_name(results: Results) -> None:
    with pytest.raises(QuestionError, match="needs 'cl' at one point named 'P9'; got none; write RUN/POINT"):
        groups(results, "cl", "P9")
    back = replace(results, campaign=None)
    with pytest.raises(QuestionError, match="needs the contour"):
        taps_on_section(back, "cl", "P2")
