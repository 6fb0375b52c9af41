"""Model and noise law found together, and what judgement is handed."""

import numpy as np
import pytest
import scipy.signal
from problems import POLES, RESIDUES, axis, noise, response

from polefit.engine.blocks import samples
from polefit.engine.estimation import estimate_model, freedom, go_past
from polefit.engine.order import largest_order, parameters
from polefit.engine.sections import evaluate
from polefit.engine.significance import information
from polefit.engine.weighting import Measured
from polefit.precision import Precision, Printed

S = axis(301)


def measured(seed=81, relative=0.0, absolute=0.0, known=0.0, turn=None, values=None):
    clean = response(S) if values is None else values
    generator = np.random.default_rng(seed)
    std = np.sqrt((relative * np.abs(clean)) ** 2 + absolute**2)
    values = clean + noise(generator, clean.shape) * std
    return Measured(S, values, np.full((len(clean), 2, S.size), known), turn)


def error(estimation, poles=POLES):
    """Of every true pole, the distance to the nearest found one."""
    found = estimation.solution.sections.poles()
    return max(np.min(np.abs(found - pole)) for pole in poles)


@pytest.mark.parametrize("level", [1e-6, 1e-4, 1e-2])
def test_relative_noise_is_recovered(level):
    found = estimate_model([measured(relative=level)])
    law = found.laws[0]
    # 2·301 squares of each channel know σ to 1/√(4·301) = 2.9 %; four of them
    assert law.relative == pytest.approx([level, level], rel=0.12)
    assert np.all(law.absolute == 0)
    assert found.solution.sections.order == 7
    assert found.whiteness.white


@pytest.mark.parametrize("level", [1e-5, 1e-3])
def test_absolute_noise_is_recovered(level):
    found = estimate_model([measured(absolute=level)])
    law = found.laws[0]
    assert law.absolute == pytest.approx([level, level], rel=0.12)
    assert np.all(law.relative == 0)
    assert found.solution.sections.order == 7


def test_reported_variance_makes_chi_square_one():
    """What the plots and detection limits use: the residual over it has variance one."""
    data = measured(relative=1e-3)
    found = estimate_model([data])
    model = found.solution.parts[0].coefficients
    basis = evaluate(found.solution.sections, S, found.solution.direct)
    rest = data.values - model @ basis.T
    parts = np.stack((rest.real, rest.imag), axis=1)
    total = np.sum(parts**2 / found.noise[0])
    # exactly one per degree of freedom where the level is above the floor of one; the level
    # is known to √(2/1200) = 4 %
    assert total / freedom(found) == pytest.approx(1.0, abs=0.16)
    assert freedom(found) == samples(found.blocks) - parameters(found.blocks, found.solution)


def test_exact_data_have_no_noise_and_exact_poles():
    found = estimate_model([measured()])
    assert np.all(found.laws[0].relative == 0)
    assert np.all(found.laws[0].absolute == 0)
    # double precision is 1e-16 of values up to 4, conditioned by widths of 0.02
    assert error(found) < 1e-11
    assert found.solution.sections.order == 7


@pytest.mark.parametrize("digits", [4, 6])
def test_printed_digits_are_weighted_as_they_are(digits):
    """Rounded values, known to be: every weight is that of its own last digit."""
    clean = response(S)
    precision = Precision("real-imaginary", Printed(digits), Printed(digits))

    def rounded(x):
        return np.array([float(f"{v:.{digits - 1}e}") for v in x.ravel()]).reshape(x.shape)

    values = rounded(clean.real) + 1j * rounded(clean.imag)
    first, second, _ = precision.rounding_std(values)
    known = np.stack((first**2, second**2), axis=1)
    found = estimate_model([Measured(S, values, known, None)])
    assert np.all(found.laws[0].relative == 0)
    assert np.all(found.laws[0].absolute == 0)
    # the floor of double precision adds next to nothing to the rounding of six digits
    assert np.allclose(found.blocks[0].weight, 1 / np.sqrt(known), rtol=1e-6)
    assert found.solution.sections.order == 7
    # residual of rounding: variance one each, kurtosis of a uniform law; 4σ = 4·√(0.8/1200)
    assert found.solution.misfit / freedom(found) == pytest.approx(1.0, abs=0.11)


def test_noise_along_and_across_the_phasor():
    """Magnitude good to 1e-5, angle to 1e-3 only: known, so the two parts weigh differently."""
    clean = response(S)
    generator = np.random.default_rng(82)
    along, across = (
        1e-5 * generator.standard_normal(clean.shape),
        1e-3 * (generator.standard_normal(clean.shape)),
    )
    values = clean * (1 + along) * np.exp(1j * across)
    size = np.abs(values)
    known = np.stack(((1e-5 * size) ** 2, (1e-3 * size) ** 2), axis=1)
    turned = estimate_model([Measured(S, values, known, values.conj() / size)])
    assert turned.solution.misfit / freedom(turned) == pytest.approx(1.0, abs=4 * np.sqrt(2 / 1200))
    blunt = estimate_model([Measured(S, values, np.zeros_like(known), None)])
    # sharper knowledge of one part makes sharper poles
    exact = np.linalg.det(turned.info.poles / turned.level)
    assert exact > np.linalg.det(blunt.info.poles / blunt.level)


def test_two_axes_share_the_poles_but_not_the_noise():
    other = axis(120, 0.2, 0.9)
    values = response(other, residues=RESIDUES[:, :1])
    quiet, loud = 1e-4, 1e-3
    second = values + loud * noise(np.random.default_rng(83), values.shape)
    data = [measured(absolute=quiet), Measured(other, second, np.zeros((1, 2, other.size)), None)]
    found = estimate_model(data)
    assert found.laws[0].absolute == pytest.approx([quiet, quiet], rel=0.12)
    # 240 squares: 4.6 % each σ
    assert found.laws[1].absolute == pytest.approx([loud], rel=0.2)
    assert found.solution.sections.order == 7
    assert found.places == np.unique(np.concatenate((S.imag, other.imag))).size


def test_progress_is_told():
    told = []
    estimate_model([measured(relative=1e-3)], told.append)
    assert told[0] == "searching the order"
    assert "estimating the noise" in told
    assert told[-1] == "checking what moves with the order"


def test_going_past_adds_two_pairs_and_never_fits_worse():
    found = estimate_model([measured(relative=1e-3)])
    past = go_past(found.blocks, found.solution, information(found.solution))
    assert past.sections.order == found.solution.sections.order + 4
    assert past.misfit < found.solution.misfit
    # eight residue parameters and four of poles on pure noise: about as many units of χ², with
    # the choice of place perhaps three times as many
    assert found.solution.misfit - past.misfit < 60 * found.level


def test_going_past_stays_where_points_are_few():
    few = S[::30]
    values = response(few, POLES[:2], RESIDUES[:2])
    data = Measured(few, values + noise(np.random.default_rng(84), values.shape, 1e-3),
                    np.zeros((2, 2, few.size)), None)  # fmt: skip
    found = estimate_model([data])
    assert found.solution.sections.order + 2 > largest_order(found.blocks)
    assert found.past is found.solution


def test_correlated_noise_is_told_and_raises_the_order():
    """Noise with a memory of 0.6 from point to point: whatever the order, no white residual."""
    generator = np.random.default_rng(85)
    few, poles, residues = axis(151), POLES[:2], RESIDUES[:2, :1]
    fresh = noise(generator, (1, few.size + 100), 1e-3)
    correlated = scipy.signal.lfilter([1.0], [1.0, -0.6], fresh, axis=1)[:, 100:]
    values = response(few, poles, residues) + correlated
    found = estimate_model([Measured(few, values, np.zeros((1, 2, few.size)), None)])
    assert not found.whiteness.white
    assert "raised by" in found.reason
    # richer models were tried to the end, and the true pairs are still among the poles, known
    # to about 1e-3 of residues of 0.05 over widths of 0.02 and less
    assert error(found, poles) < 3e-3


def test_the_caller_keeps_his_arrays():
    data = measured(relative=1e-3)
    before = [np.copy(part) for part in data[:3]]
    estimate_model([data])
    assert all(np.array_equal(*pair) for pair in zip(before, data[:3], strict=True))
