"""Keyed draws: what is shared is shared, and nothing else moves a draw."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tapband.nouns.problem import Family
from tapband.nouns.source import Shape
from tapband.probability.draws import TILE, Tape, block, scales


def family(source: str, groups: tuple[str, ...], members: int = 3, **more: object) -> Family:
    fields: dict[str, object] = {
        "source": source,
        "members": tuple(str(k) for k in range(members)),
        "point_group": groups,
        "scale_group": groups,
        "dof": np.full(len(groups), np.inf),
    }
    return Family(**(fields | more))  # type: ignore[arg-type]


ZERO = family("zero", ("a", "a", "b"))
NOISE = family("noise", ("p", "q", "r"), members=5)
DOUBTED = family("doubted", ("a", "a", "b"), shape=Shape.RECTANGULAR, reliability=0.2)
REPEATS = family("repeats", ("p", "q", "r"), dof=np.array([4.0, 4.0, 9.0]), scale_group=("s", "s", "t"))
ALL = (ZERO, NOISE, DOUBTED, REPEATS)


def test_points_of_a_group_share_and_others_do_not() -> None:
    xi = block(ALL, range(4), range(3), 1, 0)
    assert xi[0].shape == (3, 128, 3)
    np.testing.assert_array_equal(xi[0][0], xi[0][1])
    assert not np.any(xi[0][0] == xi[0][2])
    assert not np.any(xi[1][0] == xi[1][1])


def test_a_block_that_shares_everything_gets_one_copy() -> None:
    xi = block(ALL, range(4), range(2), 1, 0)
    assert xi[0].shape == (1, 128, 3)
    assert xi[1].shape == (2, 128, 5)


def test_scale_groups_share_one_scale_across_points_and_members() -> None:
    squares = scales(ALL, [0, 2, 3], range(3), 1, 0)
    assert set(squares) == {2, 3}
    np.testing.assert_array_equal(squares[3][0], squares[3][1])
    assert not np.any(squares[3][0] == squares[3][2])
    plain = block([replace(REPEATS, dof=np.full(3, np.inf))], [0], range(3), 1, 0)[0]
    np.testing.assert_allclose(
        block(ALL, [3], range(3), 1, 0)[3], plain * np.sqrt(squares[3])[..., None], rtol=1e-15
    )


def test_other_families_other_points_and_their_order_move_no_draw() -> None:
    whole = block(ALL, range(4), range(3), 7, 2)
    alone = block([NOISE], [0], range(1, 2), 7, 2)[0]
    np.testing.assert_array_equal(alone[0], whole[1][1])
    turned = replace(NOISE, point_group=("r", "p", "q"), scale_group=("r", "p", "q"))
    np.testing.assert_array_equal(block([turned], [0], range(3), 7, 2)[0][0], whole[1][2])


def test_seed_source_group_and_tile_each_give_their_own_draws() -> None:
    first = block([ZERO], [0], range(1), 1, 0)[0]
    for other in (
        block([ZERO], [0], range(1), 2, 0)[0],
        block([replace(ZERO, source="zero 2")], [0], range(1), 1, 0)[0],
        block([ZERO], [0], range(2, 3), 1, 0)[0],
        block([ZERO], [0], range(1), 1, 1)[0],
    ):
        assert not np.any(first == other)
        # Independent: a correlation of 384 pairs beyond four standard errors once in 16,000 times.
        assert abs(np.corrcoef(first.ravel(), other.ravel())[0, 1]) < 4.0 / np.sqrt(first.size)


def test_a_tape_in_chunks_of_any_size_plays_the_same_tile() -> None:
    def played(chunk: int) -> dict[int, np.ndarray]:
        tape = Tape(ALL, (0, 1, 2), 3, 0, chunk)
        parts = []
        for _ in range(TILE // chunk):
            tape.advance()
            parts.append({f: xi.copy() for f, xi in tape.of(2).items()})
        return {f: np.concatenate([part[f] for part in parts], axis=1) for f in range(4)}

    small, large = played(1_000), played(2_500)
    for f in range(4):
        assert small[f].shape == (1, TILE, len(ALL[f].members))
        np.testing.assert_array_equal(small[f], large[f])


def test_points_that_share_a_stream_share_its_buffer() -> None:
    tape = Tape(ALL, (0, 1, 2), 3, 0, 1_000)
    tape.advance()
    assert tape.of(0)[0].base is tape.of(1)[0].base
    assert not np.any(tape.of(0)[0] == tape.of(2)[0])
