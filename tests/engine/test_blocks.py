"""Weights, turns and pieces against explicit loops; the sketch of many channels."""

import numpy as np
import pytest
from problems import POLES, axis, block, noise, response, true_sections, uneven_block

from polefit.engine import blocks as blocks_module
from polefit.engine.blocks import SKETCHED, make_block, pieces, pulled_back, sketch, weighted
from polefit.engine.blocks import weighted_parts as parts_of
from polefit.engine.projection import solve

GENERATOR = np.random.default_rng(11)
S = axis(150)
UNEVEN = uneven_block(GENERATOR, S, noise(GENERATOR, (3, S.size)))


@pytest.mark.parametrize("turned", [False, True])
@pytest.mark.parametrize("shared", [False, True])
def test_rows_against_a_loop(turned, shared):
    one = UNEVEN if turned else UNEVEN._replace(turn=None)
    columns = noise(GENERATOR, (S.size, 4) if shared else (3, S.size, 4))
    rows = weighted(one, columns)
    assert rows.shape == (3, 2 * S.size, 4)
    for k in range(3):
        for n in range(S.size):
            z = columns[n] if shared else columns[k, n]
            z = z * one.turn[k, n] if turned else z
            assert np.allclose(rows[k, n], z.real * one.weight[k, 0, n], rtol=1e-15)
            assert np.allclose(rows[k, S.size + n], z.imag * one.weight[k, 1, n], rtol=1e-15)


def test_target_is_the_weighted_values():
    assert np.array_equal(UNEVEN.target, weighted(UNEVEN, UNEVEN.values[:, :, None])[:, :, 0])
    assert np.array_equal(UNEVEN.target, parts_of(UNEVEN, UNEVEN.values))
    assert (UNEVEN.channels, UNEVEN.rows) == (3, 3 * 2 * S.size)


@pytest.mark.parametrize("turned", [False, True])
def test_pulling_back_is_the_adjoint(turned):
    one = UNEVEN if turned else UNEVEN._replace(turn=None)
    columns, rest = noise(GENERATOR, (S.size, 5)), GENERATOR.normal(size=(3, 2 * S.size))
    expected = np.einsum("krm,kr->km", weighted(one, columns), rest)
    # 300 products of order one summed in another order
    assert np.allclose((pulled_back(one, rest) @ columns).real, expected, rtol=0, atol=1e-12)


@pytest.mark.parametrize("turned", [False, True])
def test_pieces_are_the_whole(monkeypatch, turned):
    monkeypatch.setattr(blocks_module, "PIECE", 3 * 64)
    turn = UNEVEN.turn if turned else None
    one = make_block(UNEVEN.s, UNEVEN.values, UNEVEN.weight, turn)
    cut = pieces(one)
    assert [piece.s.size for piece in cut] == [64, 64, 22]
    assert np.array_equal(np.concatenate([piece.s for piece in cut]), one.s)
    assert np.array_equal(np.concatenate([piece.values for piece in cut], axis=1), one.values)
    for piece in cut:
        # each piece is a block in its own right: its target is what it would compute itself
        again = make_block(piece.s, piece.values, piece.weight, piece.turn)
        assert np.array_equal(piece.target, again.target)


def test_small_blocks_stay_whole_and_many_shared_columns_cut_finer(monkeypatch):
    monkeypatch.setattr(blocks_module, "PIECE", 3 * 150)
    (whole,) = pieces(UNEVEN)
    assert whole is UNEVEN
    shared = 6 * blocks_module.COLUMNS
    assert [piece.s.size for piece in pieces(UNEVEN, shared)] == [75, 75]


def many_channels(count=20, std=0.0):
    generator = np.random.default_rng(12)
    residues = noise(generator, (4, count)) * np.array([[0.05], [0.03], [0.3], [0.5]])
    residues[3] = residues[3].real
    values = response(S, residues=residues)
    scale = np.geomspace(1e-3, 1e3, count)[:, None]
    values = (values + std * noise(generator, values.shape)) * scale
    weight = np.full((count, 2, S.size), 1.0) / scale[:, :, None]
    return make_block(S, values, weight)


def test_sketch_has_the_same_poles():
    """Mixtures of channels are functions of the same poles: exact data stay exact."""
    few = sketch(many_channels())
    assert few.channels == SKETCHED
    at_poles = solve([few], true_sections(), 2).misfit
    moved = true_sections(POLES + 0.01j * (np.arange(4) == 0))
    elsewhere = solve([few], moved, 2).misfit
    size = np.sum(few.target**2)
    assert at_poles < 1e-24 * size  # squares of rounding errors
    assert elsewhere > 1e-6 * size


def test_sketch_keeps_the_unit_of_the_noise():
    """Weighted noise of the mixtures has variance one: 6·300 squares know that to 3.3 %."""
    few = sketch(many_channels(std=1.0))
    solution = solve([few], true_sections(), 2)
    freedom = few.rows - few.channels * 9
    assert solution.misfit / freedom == pytest.approx(1.0, abs=4 * np.sqrt(2 / freedom))


def test_few_channels_are_not_sketched():
    one = block(S, noise(GENERATOR, (SKETCHED, S.size)))
    assert sketch(one) is one
