"""The isentropic stream against tables, closed forms and limits."""

from __future__ import annotations

import numpy as np
import pytest

from tapband.experiment.stream import critical_cp, reynolds, solve, stagnation_cp, vacuum_cp

# NACA Report 1135 (1953), table I: p/p_t and q/p_t, printed to four figures (from memory; recomputed
# independently of this project to the six digits below). The other columns follow from eqs 44 and 48.
TABLE = (
    (0.1, 0.993031, 0.006951, 1.002503, -66.8587, -142.857),
    (0.3, 0.939470, 0.059187, 1.022703, -6.94732, -15.8730),
    (0.5, 0.843019, 0.147528, 1.064072, -2.13340, -5.7143),
    (0.7, 0.720928, 0.247278, 1.128575, -0.77907, -2.9155),
    (0.8, 0.656022, 0.293898, 1.170402, -0.43464, -2.2321),
)


@pytest.mark.parametrize("row", TABLE)
def test_stream_follows_the_isentropic_table(row: tuple[float, ...]) -> None:
    mach, p, q, stagnation, critical, vacuum = row
    ratio = (1.0 + 0.2 * mach**2) ** -3.5
    channels = {"p_total": np.array([1.0]), "p_static": np.array([ratio])}
    stream = solve("total and static", "relative to vacuum", channels)
    assert stream.p_static[0] == pytest.approx(p, abs=5e-7)  # printed digits
    assert stream.q[0] == pytest.approx(q, abs=5e-7)
    assert stream.mach[0] == pytest.approx(mach, abs=1e-12)
    m = np.array([mach])
    assert stagnation_cp(m)[0] == pytest.approx(stagnation, abs=5e-7)
    assert critical_cp(m)[0] == pytest.approx(critical, rel=1e-5)
    assert vacuum_cp(m)[0] == pytest.approx(vacuum, abs=6e-5 if mach > 0.5 else 6e-4)


def _four_arrangements(mach: float) -> dict[str, dict[str, np.ndarray]]:
    static = 9.0e4
    total = static * (1.0 + 0.2 * mach**2) ** 3.5
    q = 0.7 * static * mach**2
    values = {"p_total": total, "p_static": static, "p_difference": total - static, "q": q, "mach": mach}
    names = {
        "total and static": ("p_total", "p_static"),
        "difference and static": ("p_difference", "p_static"),
        "dynamic and mach": ("q", "mach", "p_static"),
    }
    return {a: {n: np.array([values[n]]) for n in wanted} for a, wanted in names.items()}


@pytest.mark.parametrize("mach", [0.05, 0.3, 0.72])
@pytest.mark.parametrize("pressures", ["relative to vacuum", "relative to static", "relative to total"])
def test_all_arrangements_give_one_state(mach: float, pressures: str) -> None:
    states = [solve(a, pressures, c) for a, c in _four_arrangements(mach).items()]
    for state in states[1:]:
        for name in ("q", "mach", "p_static", "offset"):
            # A difference of two pressures of 1e5 Pa keeps 1e-11 of them; q at Mach 0.05 is 160 Pa.
            assert getattr(state, name)[0] == pytest.approx(getattr(states[0], name)[0], rel=1e-10, abs=1e-9)


@pytest.mark.parametrize("arrangement", ["total and static", "difference and static"])
@pytest.mark.parametrize("shift", ["mach_shift", "q_shift"])
def test_a_shifted_stream_stays_one_isentropic_state(arrangement: str, shift: str) -> None:
    channels = _four_arrangements(0.4)[arrangement]
    amount = np.array([0.01 if shift == "mach_shift" else 150.0])
    before = solve(arrangement, "relative to vacuum", channels)
    after = solve(arrangement, "relative to vacuum", channels, **{shift: amount})
    moved = after.mach if shift == "mach_shift" else after.q
    base = before.mach if shift == "mach_shift" else before.q
    assert moved[0] - base[0] == pytest.approx(amount[0], rel=1e-12)
    assert after.q[0] == pytest.approx(0.7 * after.p_static[0] * after.mach[0] ** 2, rel=1e-13)
    total = after.p_static * (1.0 + 0.2 * after.mach**2) ** 3.5
    if arrangement == "total and static":
        assert total[0] == pytest.approx(channels["p_total"][0], rel=1e-13)
    else:
        assert after.p_static[0] == channels["p_static"][0]


def test_q_and_mach_from_two_absolute_cells_are_nearly_one_error() -> None:
    """Recomputed independently: correlation 1.000, 0.9995, 0.983 at M 0.1, 0.3, 0.7 for equal errors."""
    for mach, expected, digits in ((0.1, 1.000, 5e-4), (0.3, 0.9995, 5e-5), (0.7, 0.983, 5e-4)):
        channels = _four_arrangements(mach)["total and static"]
        slopes = []
        for name in channels:
            varied = {k: v + (1e-20j if k == name else 0.0) for k, v in channels.items()}
            state = solve("total and static", "relative to vacuum", varied)
            slopes.append((state.q.imag[0] / 1e-20, state.mach.imag[0] / 1e-20))
        a, b = np.array(slopes).T
        assert a @ b / np.sqrt((a @ a) * (b @ b)) == pytest.approx(expected, abs=digits)


def test_difference_cell_measures_low_speed_better_than_two_absolute_ones() -> None:
    """Recomputed independently: two 20 Pa absolute cells u(q)/q = 4.0 % at M 0.1, a 5 Pa difference 0.71 %."""
    channels = _four_arrangements(0.1)
    scale = 101_325.0 / channels["total and static"]["p_total"][0]
    u = {}
    for arrangement, sizes in (
        ("total and static", {"p_total": 20.0, "p_static": 20.0}),
        ("difference and static", {"p_difference": 5.0}),
    ):
        base = {k: v * scale for k, v in channels[arrangement].items()}
        parts = []
        for name, size in sizes.items():
            varied = {k: v + (1e-20j if k == name else 0.0) for k, v in base.items()}
            state = solve(arrangement, "relative to vacuum", varied)
            parts.append(state.q.imag[0] / 1e-20 * size / state.q.real[0])
        u[arrangement] = np.hypot.reduce(parts)
    assert u["total and static"] == pytest.approx(0.040, abs=5e-4)
    assert u["difference and static"] == pytest.approx(0.0071, abs=5e-5)


def test_reynolds_number_of_the_standard_atmosphere() -> None:
    """U.S. Standard Atmosphere, 1976, sea level: ν = 1.4607e-5 m²/s, a = 340.294 m/s (printed digits)."""
    mach = np.array([0.1])
    total = np.array([288.15 * (1 + 0.2 * 0.01)])
    number = reynolds(mach, np.array([101_325.0]), total, 1.0)[0]
    assert number == pytest.approx(0.1 * 340.294 / 1.4607e-5, rel=1e-4)
