"""The cheapest options: against brute force, against a whole reduction, and what is said when none do."""

from __future__ import annotations

from dataclasses import replace
from itertools import product

import numpy as np
import pytest

from plans import angle_slot, instruments, planned, scanner_slot, targets
from tapband import face
from tapband.probability.linearised import propagate
from tapband.questions.basis import basis_of
from tapband.questions.catalogue import Catalogue, choices_of
from tapband.questions.choice import selected
from tapband.questions.ranges import ranges
from tapband.questions.selection import Search, frontier
from tapband.reduction import assemble

# Ratios and costs agree to the rounding of sums of squares; the search calls two within 1e-7 the same.
SAME = 1e-6
FEW = [one for one in instruments() if one.name in ("module zero", "port zero", "angle setting")]


def random_catalogue(seed: int, slots: int = 0, options: int = 0, demands: int = 0) -> Catalogue:
    """Variances over five decades, some with few degrees of freedom; about half of the cases are feasible."""
    rng = np.random.default_rng(seed)
    slots = slots or int(rng.integers(1, 5))
    counts = [options or int(rng.integers(1, 6)) for _ in range(slots)]
    demands = demands or int(rng.integers(1, 6))
    slot = np.repeat(np.arange(slots), counts)
    u = rng.lognormal(0.0, 1.0, (slots, demands))[slot]
    u = u * rng.lognormal(0.0, 0.8, (slot.size, 1)) * rng.lognormal(0.0, 0.2, (slot.size, demands))
    nu = np.where(rng.random(slot.size) < 0.5, rng.integers(1, 12, slot.size), np.inf)
    fixed = rng.lognormal(-1.0, 1.0, demands) ** 2
    typical = fixed + sum(np.median(u[slot == s] ** 2, axis=0) for s in range(slots))
    return Catalogue(
        slot=slot.astype(np.int64),
        cost=100.0 * rng.integers(0, 30, slot.size),
        variance=u**2,
        quartic=u**4 / nu[:, None],
        fixed=fixed,
        fixed_quartic=fixed**2 / np.where(rng.random(demands) < 0.5, 8.0, np.inf),
        limit=2.0 * np.sqrt(typical) * rng.uniform(0.7, 1.6, demands),
        eligible=rng.random(slot.size) < 0.9,
        level=0.95,
    )


def every_choice(catalogue: Catalogue) -> list[tuple[float, float]]:
    """Cost and worst ratio of every choice of eligible options, cheapest first, then the best."""
    sets = [np.flatnonzero((catalogue.slot == s) & catalogue.eligible) for s in range(catalogue.slots)]
    found = [(catalogue.price(c), catalogue.worst(c)) for c in product(*sets)]
    return sorted(found)


@pytest.mark.parametrize("part", range(10))
def test_selection_equals_brute_force_on_thirty_random_catalogues(part: int) -> None:
    feasible = 0
    for seed in range(30 * part, 30 * part + 30):
        catalogue = random_catalogue(seed)
        wanted = [choice for choice in every_choice(catalogue) if choice[1] <= 1.0 + 1e-9]
        found = Search(catalogue=catalogue).cheapest()
        if not wanted:
            assert found is None, seed
            continue
        assert found is not None, seed
        assert found.cost == pytest.approx(wanted[0][0], rel=SAME), seed
        assert found.worst == pytest.approx(wanted[0][1], rel=SAME), seed
        feasible += 1
    assert 5 < feasible < 30  # the catalogues try both answers


@pytest.mark.parametrize("part", range(4))
def test_frontier_holds_every_efficient_set_and_no_other(part: int) -> None:
    for seed in range(1000 + 8 * part, 1008 + 8 * part):
        catalogue = random_catalogue(seed)
        wanted: list[tuple[float, float]] = []
        for cost, worst in every_choice(catalogue):
            if not wanted or worst < wanted[-1][1] * (1.0 - 1e-7):
                wanted.append((cost, worst))
        found, complete = frontier(Search(catalogue=catalogue))
        assert complete
        assert [one.cost for one in found] == pytest.approx([cost for cost, _ in wanted], rel=SAME), seed
        assert [one.worst for one in found] == pytest.approx([worst for _, worst in wanted], rel=SAME), seed


def test_smallest_worst_ratio_equals_brute_force() -> None:
    for seed in range(2000, 2030):
        catalogue = random_catalogue(seed)
        wanted = min((worst for _, worst in every_choice(catalogue)), default=None)
        found = Search(catalogue=catalogue).smallest()
        assert (found is None) == (wanted is None)
        if found is not None and wanted is not None:
            assert found.worst == pytest.approx(wanted, rel=SAME), seed


def test_a_large_catalogue_is_solved_with_few_cuts() -> None:
    # 8 slots of 20 options, 50 points of 3 targets: brute force would look at 2.6e10 choices.
    catalogue = random_catalogue(1, slots=8, options=20, demands=150).scaled(1.25)
    search = Search(catalogue=catalogue)
    found = search.cheapest()
    assert found is not None
    assert catalogue.worst(found.chosen) <= 1.0 + 1e-9
    assert len(search.rows) < 100


def test_terms_of_the_catalogue_are_those_of_a_whole_reduction() -> None:
    basis = basis_of(planned(slots=(scanner_slot(), angle_slot())))
    choices = choices_of(basis, ranges(basis))
    for chosen in product(range(4), range(4, 6)):
        linear = propagate(assemble(choices.campaign(chosen)).problem, 0.95)
        wanted = basis.demands.of(linear.U) / basis.demands.limit
        # The same sums in another order: rounding alone.
        assert choices.catalogue.ratio(chosen) == pytest.approx(wanted, rel=1e-10)


def test_selected_options_meet_every_target_by_the_headline_interval() -> None:
    basis = basis_of(planned(slots=(scanner_slot(), angle_slot())))
    choices = choices_of(basis, ranges(basis))
    answer = selected(choices)
    assert answer.choice is not None
    results = face.reduce(choices.campaign(answer.choice.chosen))
    rows = results.tables["targets"]
    assert (rows["met"] == "yes").all()
    assert results.exit_status == 0
    # The worst ratio is found again: same draws, same numbers.
    assert rows["ratio"].max() == pytest.approx(answer.choice.worst, rel=1e-9)


def test_cheapest_by_the_headline_interval_among_all_choices_of_a_campaign() -> None:
    basis = basis_of(planned(slots=(scanner_slot(), angle_slot())))
    choices = choices_of(basis, ranges(basis))
    answer = selected(choices)
    assert answer.choice is not None
    met = []
    for chosen in product(np.flatnonzero(choices.catalogue.eligible[:4]), (4, 5)):
        rows = face.reduce(choices.campaign(chosen)).tables["targets"]
        if (rows["met"] == "yes").all():
            met.append(choices.catalogue.price(chosen))
    assert answer.choice.cost == min(met)


def test_an_option_whose_full_scale_the_readings_pass_is_not_eligible() -> None:
    slot = scanner_slot(costs=(9000.0, 6000.0, 2500.0, 1.0))
    plan = face.size(planned(FEW, slots=(slot, angle_slot())))
    options = plan.tables["options"].set_index("option")
    assert options.loc["1500 Pa", "eligible"] == "no"
    assert "past the full scale of 1500 Pa" in options.loc["1500 Pa", "reason"]
    assert "1500 Pa" not in set(plan.tables["selection"]["option"])
    assert "1500 Pa" not in set(plan.tables["frontier"]["scanner"])


def test_infeasible_targets_say_the_smallest_ratio_and_what_binds() -> None:
    plan = face.size(planned(FEW, slots=(scanner_slot(), angle_slot()), wanted=targets(cl=0.002)))
    assert plan.exit_status == 1
    assert plan.tables["selection"].empty
    said = "\n".join(plan.notes)
    assert "Infeasible: no set of options meets every target." in said
    smallest = plan.tables["frontier"]["worst_ratio"].min()
    assert smallest > 1.0
    assert "what binds is cl at forecast/F03" in said


def test_a_slot_without_an_eligible_option_is_named() -> None:
    slot = scanner_slot()
    only = replace(slot, options=slot.options[-1:])
    plan = face.size(planned(FEW, slots=(only,)))
    assert plan.exit_status == 1
    assert any('no option of slot "scanner" holds the readings' in note for note in plan.notes)


def test_few_degrees_of_freedom_count_against_an_option() -> None:
    # U = k(ν) u: with ν = 2 alone k is 4.30 (t-table), so that what √V allows by 1.96 fails.
    catalogue = Catalogue(
        slot=np.array([0, 0]), cost=np.array([1.0, 2.0]), variance=np.array([[1.0], [1.4]]),
        quartic=np.array([[1.0 / 2.0], [0.0]]), fixed=np.zeros(1), fixed_quartic=np.zeros(1),
        limit=np.array([2.5]), eligible=np.ones(2, dtype=np.bool_), level=0.95,
    )  # fmt: skip
    found = Search(catalogue=catalogue).cheapest()
    assert found is not None
    assert found.chosen == (1,)
