"""The whole identification: exact circuits, invariances, refusals and what is said."""

import numpy as np
import pytest
from circuits import Circuit
from rational import (
    complex_noise,
    nearest_mode,
    nearest_pole,
    partial_fractions,
    response_set,
    unstable_in_band,
)

import polefit
from polefit.analysis.judgement import CLAIM_CHANCE
from polefit.engine.detection import noncentrality
from polefit.engine.significance import threshold

CARDS = (
    "L1 a 0 1u", "C1 a 0 100p", "R1 a 0 5k", "C12 a b 10p", "L2 b 0 0.4u", "C2 b 0 80p",
    "R2 b 0 3k", "G1 b 0 b 0 -1m", "L23 b c 1u", "C3 c 0 60p", "R3 c 0 1.5k",
)  # fmt: skip
CIRCUIT = Circuit.from_cards(*CARDS)
"""Three coupled tanks; a negative conductance at b makes one pair grow."""
TRUTH = CIRCUIT.poles()[CIRCUIT.poles().imag > 0]
HZ = np.linspace(5e6, 45e6, 301)
LEVEL = 1e-4


def noisy(values, seed, level=LEVEL):
    """Circular noise of this share of each sample."""
    values = np.asarray(values)
    return values + complex_noise(
        np.random.default_rng(seed), values.shape, (level * np.abs(values)) ** 2
    )


def probe(node, frequency_hz=HZ, seed=1, level=LEVEL):
    values = noisy(CIRCUIT.driving_points(frequency_hz, [node]), seed, level)
    return response_set(frequency_hz, values, channels=[node])


def all_nodes(seed=1, order=("a", "b", "c")):
    values = noisy(CIRCUIT.driving_points(HZ, ["a", "b", "c"]), seed)
    columns = ["abc".index(node) for node in order]
    return response_set(HZ, values[:, columns], channels=list(order))


@pytest.fixture(scope="module")
def result():
    return polefit.identify(all_nodes())


def sigma_error(mode, pole):
    """Error of (Re, Im) in standard uncertainties."""
    error = mode.pole_rad_per_s - pole
    return np.abs([error.real, error.imag]) / np.sqrt(np.diag(mode.covariance))


# -- one circuit, known exactly -----------------------------------------------------------------


def test_poles_residues_and_verdict_of_a_circuit(result):
    assert result.verdict == "unstable"
    assert result.fit.order == 6
    assert [m.verdict for m in result.modes] == ["unstable", "stable", "stable"]
    assert result.modes[0].pole_rad_per_s.real > 0
    for pole in TRUTH:
        mode = nearest_mode(result, pole)
        assert np.all(sigma_error(mode, pole) < 4.5)  # six numbers: chance 4e-5
        exact = CIRCUIT.residues(pole, [("a", "a"), ("b", "b"), ("c", "c")])
        for view in mode.nodes:
            true = exact["abc".index(view.channel.output)]
            assert abs(view.residue - true) < 5 * view.residue_std
            assert abs(view.leverage.value - true.real) < 4.5 * view.leverage.std
        # the nodes are ranked by leverage, as they truly are
        ranked = ["abc"[i] for i in np.argsort(-np.abs(exact.real))]
        assert [v.channel.output for v in mode.nodes] == ranked


def test_leverage_is_what_a_conductance_does(result):
    """−dσ/dG by moving the exact pole with 1e-8 S at each node; the fit knows it to 1e-3."""
    growing = nearest_mode(result, TRUTH[np.argmax(TRUTH.real)])
    exact = TRUTH[np.argmax(TRUTH.real)]
    for view in growing.nodes:
        node = view.channel.output
        loaded = Circuit.from_cards(*CARDS, f"Rx {node} 0 1e8").poles()
        moved = loaded[np.argmin(np.abs(loaded - exact))]
        slope = -(moved - exact).real / 1e-8
        assert view.leverage.value == pytest.approx(slope, rel=1e-3, abs=4 * view.leverage.std)


def test_the_growing_loop_is_listed_with_its_nodes(result):
    (first, *_) = result.loops
    assert first.mode == 0
    assert first.nodes == tuple(v.channel.output for v in result.modes[0].nodes)
    for loop in result.loops:
        mode = result.modes[loop.mode]
        assert mode.verdict != "stable" or mode.damping_ratio.value < 0.05


def test_model_and_noise_describe_the_data(result):
    (data,) = result.responses
    rest = np.abs(result.model.response(HZ) - data.values)
    assert result.noise_std[0].shape == data.values.shape
    # 903 complex samples, each |rest|²/variance of mean 1 and variance 1: ±0.033 (one σ), less
    # the share of 31 parameters in 1806
    assert np.mean((rest / result.noise_std[0]) ** 2) == pytest.approx(1.0, abs=0.14)
    # E|n|² = level²|H|²
    assert result.fit.noise_relative == pytest.approx(LEVEL, rel=0.1)
    assert result.fit.rms_relative == pytest.approx(LEVEL, rel=0.1)
    assert result.fit.residual_white
    assert "relative noise estimated from the residual" in result.fit.noise_origin
    assert result.fit.stable_model_misfit > 100


def test_the_same_data_give_the_same_answer(result):
    again = polefit.identify(all_nodes())
    assert np.array_equal(again.model.poles, result.model.poles)
    assert again.to_dict() == result.to_dict()


def test_several_sets_with_axes_of_their_own_share_the_poles():
    """Three probes on three axes, against the exact circuit; no axis is common."""
    sets = [
        probe("a", np.linspace(5e6, 45e6, 251), 11),
        probe("b", np.geomspace(8e6, 40e6, 173), 12),
        probe("c", np.linspace(6e6, 44.4e6, 97), 13, 1e-3),
    ]
    result = polefit.identify(sets)
    assert [str(c) for c in result.channels] == ["a", "b", "c"]
    assert result.model.poles.size == 6
    assert result.model.residues.shape == (6, 3)
    assert result.band_hz == (5e6, 45e6)
    assert [s.shape for s in result.noise_std] == [(251, 1), (173, 1), (97, 1)]
    alone = polefit.identify(sets[0])
    for pole in TRUTH:
        mode = nearest_mode(result, pole)
        assert np.all(sigma_error(mode, pole) < 4.5)
        single = nearest_mode(alone, pole)
        # more data on the same pole: never a larger uncertainty (10 % for its own noise)
        assert mode.growth_rate_per_s.std < 1.1 * single.growth_rate_per_s.std
        exact = CIRCUIT.residues(pole, [("a", "a"), ("b", "b"), ("c", "c")])
        for view in mode.nodes:
            true = exact["abc".index(view.channel.output)]
            assert abs(view.residue - true) < 5 * view.residue_std


# -- what must not matter -----------------------------------------------------------------------


def same_answer(one, other, frequency=1.0, level=1.0):
    """Numbers of `other` are those of `one`, scaled; tolerances are small parts of their σ."""
    assert other.verdict == one.verdict
    assert len(other.modes) == len(one.modes)
    assert other.fit.order == one.fit.order
    for a in one.modes:
        b = nearest_mode(other, a.pole_rad_per_s * frequency)
        std = np.sqrt(np.trace(a.covariance))
        # the refinement stops within 1e-5 of χ², which is 3e-3 σ
        assert abs(b.pole_rad_per_s / frequency - a.pole_rad_per_s) < 0.02 * std
        assert b.growth_rate_per_s.std == pytest.approx(
            a.growth_rate_per_s.std * frequency, rel=1e-2
        )
        assert (b.verdict, b.in_band) == (a.verdict, a.in_band)
        views = {v.channel: v for v in b.nodes}
        for view in a.nodes:
            scaled = views[view.channel].residue / (frequency * level)
            assert abs(scaled - view.residue) < 0.05 * view.residue_std


@pytest.mark.parametrize("factor", [1e-6, 1e-3, 7.0, 1e6])
def test_the_unit_of_frequency_does_not_matter(result, factor):
    """Element values scaled: every pole and residue of an impedance goes with the frequency."""
    data = all_nodes()
    scaled = response_set(HZ * factor, data.values, channels=["a", "b", "c"])
    same_answer(result, polefit.identify(scaled), frequency=factor)


@pytest.mark.parametrize("factor", [1e-9, -1.0, 50.0, 1e12])
def test_the_unit_of_the_response_does_not_matter(result, factor):
    data = all_nodes()
    scaled = response_set(HZ, data.values * factor, channels=["a", "b", "c"])
    same_answer(result, polefit.identify(scaled), level=factor)


@pytest.mark.parametrize("order", [("c", "a", "b"), ("b", "c", "a")])
def test_the_order_of_channels_does_not_matter(result, order):
    other = polefit.identify(all_nodes(order=order))
    assert tuple(c.output for c in other.channels) == order
    same_answer(result, other)


def test_one_set_or_a_set_for_each_channel_does_not_matter(result):
    data = all_nodes()
    parts = [response_set(HZ, data.values[:, k], channels=[name]) for k, name in enumerate("abc")]
    same_answer(result, polefit.identify(parts))
    same_answer(result, polefit.identify(parts[::-1]))


def test_channels_of_very_different_size_count_alike(result):
    """Relative noise: a channel in other units keeps its part in the answer.

    Six decades; what lies fifteen below its neighbours may be the rounding of a common solution.
    """
    data = all_nodes()
    factors = np.array([1e-3, 1.0, 1e3])
    scaled = response_set(HZ, data.values * factors, channels=["a", "b", "c"])
    other = polefit.identify(scaled)
    for pole in TRUTH:
        a, b = nearest_mode(result, pole), nearest_mode(other, pole)
        assert abs(a.pole_rad_per_s - b.pole_rad_per_s) < 0.02 * np.sqrt(np.trace(a.covariance))


def test_the_callers_arrays_are_left_alone():
    frequency, values = HZ.copy(), CIRCUIT.driving_points(HZ, ["a"])
    before = values.copy()
    polefit.identify(response_set(frequency, values, channels=["a"]))
    assert np.array_equal(values, before)
    assert np.array_equal(frequency, HZ)


# -- verdicts -----------------------------------------------------------------------------------

TANK_HZ = np.linspace(0.5e9, 1.5e9, 201)


def tank(growth_ratio, level, seed=3, quantity="impedance", frequency_hz=TANK_HZ):
    """One pair half-way between two samples, with −ζ = growth_ratio, in absolute noise."""
    pole = 2 * np.pi * 1.0025e9 * (growth_ratio + 1j)
    clean = partial_fractions(frequency_hz, [pole], [2e9], constant=0.3)
    noise = complex_noise(np.random.default_rng(seed), clean.shape, level**2)
    return response_set(frequency_hz, clean + noise, quantity, channels=["n1"]), pole


@pytest.mark.parametrize("sign", [-1, 1])
def test_the_sign_is_right_when_the_data_can_tell(sign):
    """|ζ| = 0.002 in noise that knows it well."""
    for seed in range(5):
        data, pole = tank(0.002 * sign, 0.1, seed)
        result = polefit.identify(data)
        mode = nearest_mode(result, pole)
        assert 5 * mode.damping_ratio.std < 0.002
        assert result.verdict == mode.verdict == ("unstable" if sign > 0 else "stable")


def test_undecided_when_the_data_cannot_tell():
    """Growth a small part of its uncertainty: neither sign may be claimed.

    Each draw decides wrongly with a chance of 5 %; of 20, four or more have 1.6 %.
    """
    decided = 0
    for seed in range(20):
        data, pole = tank(1e-7, 0.5, seed)
        result = polefit.identify(data)
        mode = nearest_mode(result, pole)
        assert mode.growth_rate_per_s.std > 5 * pole.real
        assert 1e-3 < mode.probability_unstable < 1 - 1e-3
        decided += result.verdict != "undecided"
    assert decided <= 3
    assert "growth rate" in result.reason


def test_a_resonance_that_stands_out_of_absolute_noise_is_found():
    """Peak 13 times the noise, which everything off resonance drowns in; growth at 15 σ."""
    for seed in range(6):
        data, pole = tank(0.005, 5.0, seed)
        result = polefit.identify(data)
        assert result.verdict == "unstable"
        assert abs(nearest_mode(result, pole).pole_rad_per_s - pole) < pole.real


def test_noise_alone_is_not_called_stable():
    for seed in range(5):
        values = complex_noise(np.random.default_rng(seed), 201, 1.0)
        result = polefit.identify(response_set(TANK_HZ, values))
        assert result.verdict == "undecided"
        assert "noise" in result.reason
        assert not result.modes


def test_a_growing_real_pole_is_unstable():
    """A latch: 1 pF across −1 kΩ and a little series resistance; it grows without ringing."""
    frequency = np.geomspace(1e6, 10e9, 301)
    clean = 10 + partial_fractions(frequency, [1e9], [1e12])
    result = polefit.identify(response_set(frequency, noisy(clean, 5)))
    (mode,) = unstable_in_band(result)
    assert result.verdict == "unstable"
    assert mode.real
    assert mode.frequency_hz.value == 0
    assert mode.growth_rate_per_s.value == pytest.approx(1e9, abs=4.5 * mode.growth_rate_per_s.std)
    assert mode.damping_ratio.value == -1


def test_a_mode_beyond_the_band_edge_is_noted_and_decides_nothing():
    """Growing pair at 1 GHz, data up to 0.97 GHz."""
    data, pole = tank(0.02, 1e-3, frequency_hz=np.linspace(0.2e9, 0.97e9, 201))
    result = polefit.identify(data)
    mode = nearest_mode(result, pole)
    assert not mode.in_band
    assert not unstable_in_band(result)
    assert result.verdict != "unstable"
    (note,) = [n for n in result.notes if "edge of the band" in n]
    assert f"{mode.frequency_hz.value / 1e9:.4g} GHz" in note
    assert "970 MHz" in note
    assert "widen the sweep" in note


def test_band_option_is_the_band():
    whole, pole = tank(0.02, 1e-3)
    cut = polefit.identify(whole, band_hz=(0.5e9, 0.9e9))
    assert cut.band_hz == (whole.in_band(0.5e9, 0.9e9).band_hz)
    assert cut.verdict != "unstable"
    assert polefit.identify(whole).verdict == "unstable"
    inside = whole.in_band(0.5e9, 0.9e9)
    assert polefit.identify(inside).model.poles == pytest.approx(cut.model.poles, rel=1e-9)
    assert abs(nearest_pole(cut, pole) - pole) < 0.1 * abs(pole)


def test_every_pole_is_a_mode_or_has_a_reason():
    """Poles outside the band, strong ones: far above it here."""
    clean = partial_fractions(
        HZ, [-2e6 + 2j * np.pi * 20e6, -2e8 + 2j * np.pi * 150e6], [1e9, 1e10], constant=3.0
    )
    result = polefit.identify(response_set(HZ, noisy(clean, 6)))
    upper = result.model.poles[result.model.poles.imag >= 0]
    listed = [m.pole_rad_per_s for m in (*result.modes, *result.background)]
    assert len(listed) == len(upper)
    for pole in upper:
        assert min(abs(pole - p) for p in listed) < 1e-9 * abs(pole)
    assert result.background
    for one in result.background:
        assert len(one.reason) > 20
        assert one.pole_rad_per_s.imag > 2 * np.pi * 45e6 or "stand out" in one.reason


# -- kinds of data ------------------------------------------------------------------------------


@pytest.mark.parametrize("quantity", ["impedance", "admittance", "scattering", "transfer"])
def test_leverage_is_given_for_impedances_only(quantity):
    data, _ = tank(-0.01, 1e-3, quantity=quantity)
    result = polefit.identify(data)
    assert result.quantity == quantity
    (view,) = result.modes[0].nodes
    assert (view.leverage is not None) == (quantity == "impedance")


def test_transfer_impedances_have_no_leverage():
    pairs = [("b", "a"), ("c", "a")]
    data = response_set(HZ, noisy(CIRCUIT.impedances(HZ, pairs), 7), channels=pairs)
    result = polefit.identify(data)
    assert result.verdict == "unstable"
    assert all(v.leverage is None for m in result.modes for v in m.nodes)
    exact = CIRCUIT.residues(result.modes[0].pole_rad_per_s, pairs)
    for view in result.modes[0].nodes:
        true = exact[pairs.index((view.channel.output, view.channel.input))]
        assert abs(view.residue - true) < 5 * view.residue_std


# -- uncertainty and detection ------------------------------------------------------------------


def test_residues_and_leverage_scatter_as_reported():
    """80 draws know a spread to 8 % (one σ); the median reported is compared."""
    pole = TRUTH[np.argmax(TRUTH.real)]
    exact = CIRCUIT.residues(pole, [("b", "b")])[0]
    leverage, residue = [], []
    for seed in range(80):
        (view,) = nearest_mode(polefit.identify(probe("b", seed=seed, level=1e-3)), pole).nodes
        leverage.append((view.leverage.value - exact.real, view.leverage.std))
        residue.append((abs(view.residue - exact), view.residue_std))
    for errors in (leverage, residue):
        error, std = np.array(errors).T
        assert np.sqrt(np.mean(error**2)) == pytest.approx(np.median(std), rel=4 * 0.08)


HIDDEN = 2 * np.pi * 1.1e9 * (0.01 + 1j)
"""A growing pair with the damping ratio for which limits are given."""


def beside_a_strong_mode(residue, seed):
    """Identification of one strong stable pair with HIDDEN beside it."""
    clean = partial_fractions(TANK_HZ, [(-0.03 + 1j) * 2 * np.pi * 0.7e9], [1e9], constant=1.0)
    clean = clean + partial_fractions(TANK_HZ, [HIDDEN], [residue])
    noise = complex_noise(np.random.default_rng(seed), TANK_HZ.size, 1e-3**2)
    return polefit.identify(response_set(TANK_HZ, clean + noise))


def share_found(of_limit, draws=40):
    """How often HIDDEN is claimed with this part of the reported limit, phases 0 and 90°."""
    detection = beside_a_strong_mode(0.0, 0).detection
    assert (detection.damping_ratio, detection.power) == (-0.01, 0.95)
    limit = np.interp(1.1e9, detection.frequency_hz, detection.residue[:, 0])
    count = 0
    for seed in range(draws):
        modes = beside_a_strong_mode(of_limit * limit * 1j ** (seed % 2), seed).modes
        count += any(abs(m.pole_rad_per_s - HIDDEN) < 3 * HIDDEN.real for m in modes)
    return count / draws


def test_a_mode_at_the_reported_limit_is_found():
    """95 % promised for the least favourable phase; 40 draws know that to 3.4 % (one σ)."""
    assert share_found(1.0) >= 0.95 - 3 * 0.034


def test_well_above_the_limit_nearly_every_mode_is_found_and_well_below_hardly_any():
    assert share_found(1.75) >= 0.95
    # a sixteenth of the noncentrality of 42 for 95 %: 24 would be needed
    assert noncentrality(threshold(1, 201, CLAIM_CHANCE), 2, 0.95) == pytest.approx(42, abs=1)
    assert share_found(0.25, draws=20) <= 0.1


def test_limit_is_given_for_every_channel_over_the_band(result):
    detection = result.detection
    assert detection.residue.shape == (detection.frequency_hz.size, 3)
    assert HZ[0] <= detection.frequency_hz[0] < detection.frequency_hz[-1] <= HZ[-1]
    assert np.all(detection.residue > 0)
    louder = polefit.identify(
        response_set(HZ, noisy(CIRCUIT.driving_points(HZ, ["a", "b", "c"]), 1, 10 * LEVEL),
                     channels=["a", "b", "c"])
    ).detection  # fmt: skip
    # ten times the noise, ten times the limit, up to how well each noise is known
    assert np.median(louder.residue / detection.residue) == pytest.approx(10, rel=0.1)


# -- the rest of the interface ------------------------------------------------------------------


@pytest.mark.parametrize("confidence", [0.5, 1.0, 0.0, -1, 95, np.nan, np.inf])
def test_confidence_out_of_range_is_refused(confidence):
    with pytest.raises(polefit.ArgumentError, match=r"^confidence: .* give e\.g\. 0\.95$"):
        polefit.identify(all_nodes(), confidence=confidence)


def test_more_confidence_never_decides_more():
    """A decaying pair at about three standard uncertainties from the axis."""
    data, _ = tank(-1.5e-5, 0.5, seed=9)
    verdicts = [polefit.identify(data, confidence=c).verdict for c in (0.6, 0.95, 1 - 1e-6)]
    assert verdicts == ["stable", "stable", "undecided"]


def test_progress_is_told():
    told = []
    polefit.identify(all_nodes(), progress=told.append)
    assert len(told) >= 3
    assert all(isinstance(text, str) and text for text in told)


def test_what_was_left_out_is_noted():
    values = np.stack((probe("a").values[:, 0], 0 * HZ), axis=1)
    result = polefit.identify(response_set(HZ, values, channels=["a", "dead"]))
    assert "channel dead is zero throughout and was left out" in result.notes
    assert [str(c) for c in result.channels] == ["a"]
    assert result.model.residues.shape[1] == 1


def test_the_fewest_points_still_give_an_answer():
    """Eight points of one pair: some verdict, no failure, and never a false alarm."""
    for seed in range(5):
        data, _ = tank(-0.1, 1e-4, seed, frequency_hz=np.linspace(0.6e9, 1.4e9, 8))
        assert polefit.identify(data).verdict in ("stable", "undecided")


def test_a_constant_has_no_modes():
    result = polefit.identify(response_set(TANK_HZ, np.full(201, 50.0 + 0j)))
    assert result.verdict == "stable"
    assert not result.modes
    assert result.fit.order == 0
