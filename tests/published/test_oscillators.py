"""Textbook oscillators from their element values: poles, and the sign around the start condition.

Start conditions: A. S. Sedra, K. C. Smith, "Microelectronic Circuits"; P. R. Gray, R. G. Meyer,
"Analysis and Design of Analog Integrated Circuits"; B. Razavi, "RF Microelectronics" (formulas
from memory, each derived again below as `threshold` and checked to put the pair on the axis). The
pole figures were computed with 120-digit arithmetic from det(G + sC) and agree with ngspice's
pole-zero analysis; here they check the nodal analysis of this project, and that the result of
identification.
"""

from dataclasses import dataclass
from math import sqrt

import numpy as np
import pytest
from circuits import Circuit
from rational import nearest_mode, response_set

import polefit


@dataclass(frozen=True)
class Oscillator:
    """`cards` hold the varied element as {x}; `pair` is at x = `value`, rad/s.

    `around` holds (f0 in Hz, ζ) of the pair at 0.999 and 1.001 of the threshold.
    """

    cards: str
    value: float
    threshold: float
    node: str
    band_hz: tuple[float, float]
    pair: complex
    others: tuple[complex, ...]
    threshold_hz: float
    around: tuple[tuple[float, float], tuple[float, float]]

    def circuit(self, value):
        return Circuit.from_cards(*self.cards.format(x=repr(float(value))).splitlines())


MUTUAL = 0.5 * sqrt(2) * 1e-6  # k·√(L1·L2) of the coupled Hartley coil
OSCILLATORS = {
    "Wien bridge": Oscillator(
        """E1 out 0 p 0 {x}
        R1 out a 10k
        C1 a p 10n
        R2 p 0 10k
        C2 p 0 10n""",
        3.1, 3.0, "p", (200, 3200), 500 + 9987.49217771909j, (),
        1591.5494309189535, ((1591.5494309189535, 1.5e-3), (1591.5494309189535, -1.5e-3)),
    ),
    "phase shift, high-pass": Oscillator(
        """E1 o 0 g 0 {x}
        C1 o a 10n
        R1 a 0 10k
        C2 a b 10n
        R2 b 0 10k
        C3 b g 10n
        R3 g 0 10k""",
        -30.0, -29.0, "g", (50, 2000), 25.912947472066207 + 4028.8155684229855j,
        (-1987.3097659118744,), 649.7473343613967,
        ((650.0007733503402, 1.9108700510374349e-4), (649.4942496096861, -1.9082289378021005e-4)),
    ),
    "phase shift, low-pass": Oscillator(
        """G1 a 0 g 0 {x}
        R1 a 0 1k
        C1 a 0 100f
        R2 a b 1k
        C2 b 0 100f
        R3 b g 1k
        C3 g 0 100f""",
        0.032, 0.029, "a", (0.5e9, 12e9), 469515190.0246248 + 25448238692.362465j,
        (-50939030380.04925,), 3898484006.1683807,
        ((3896963965.1385174, 1.9108700510374349e-4), (3900003106.387269, -1.9082289378021005e-4)),
    ),
    "ring of three": Oscillator(
        """G1 n2 0 n1 0 {x}
        R1 n2 0 1k
        C1 n2 0 1p
        G2 n3 0 n2 0 {x}
        R2 n3 0 1k
        C2 n3 0 1p
        G3 n1 0 n3 0 {x}
        R3 n1 0 1k
        C3 n1 0 1p""",
        2.2e-3, 2e-3, "n1", (10e6, 1e9), 1e8 + 1905255888.325765j, (-3.2e9,), 275664447.710896,
        ((275388829.25324595, 5.779281008727387e-4), (275940158.05677956, -5.767733997570097e-4)),
    ),
    "Colpitts, common source": Oscillator(
        """G1 d 0 g 0 {x}
        R1 d 0 200
        C2 d 0 50p
        C1 g 0 100p
        L1 d g 100n""",
        12e-3, 100 / 50 / 200, "d", (20e6, 200e6), 6395460.92036421 + 549000726.7255887j,
        (-112790921.84072842,), 87172752.46988209,
        ((87171815.68920505, 5.8897982402962625e-5), (87173690.37192245, -5.889181304530061e-5)),
    ),
    # g·Rp > 4/(1 − 1/Q²) with 1/Q² = 0.02 here; the common rule g·Rp > 4 is its limit for high Q
    "Colpitts, common gate": Oscillator(
        """G1 d s 0 s {x}
        Rp d 0 500
        L1 d 0 50n
        C1 d s 20p
        C2 s 0 20p""",
        10e-3, 4 / 0.98 / 500, "d", (50e6, 600e6), 21338220.775640536 + 1435235606.8979986j,
        (-242676441.55128106,), 227364204.41699335,
        ((227359791.03980315, 6.728639805918408e-5), (227368621.5830461, -6.727617289864084e-5)),
    ),
    "Hartley": Oscillator(
        """G1 d 0 g 0 {x}
        R1 d 0 1k
        L1 g 0 1u
        L2 d 0 2u
        C1 d g 100p""",
        3e-3, 2 / 1e3, "d", (1e6, 20e6), 1079455.9376851716 + 57559426.93102573j,
        (-377158911.8753703,), 9188814.923696535,
        ((9188855.199963449, 3.798439425000698e-5), (9188774.59632669, -3.798274584026668e-5)),
    ),
    "Hartley, coupled": Oscillator(
        """G1 d 0 g 0 {x}
        R1 d 0 1k
        L1 0 g 1u
        L2 d 0 2u
        K12 L1 L2 0.5
        C1 d g 100p""",
        3e-3, (2e-6 + MUTUAL) / (1e-6 + MUTUAL) / 1e3, "d", (1e6, 20e6),
        1662601.7540355062 + 47460003.14307938j, (-739027463.9035869,), 7575188.796900526,
        ((7575201.2844203, 3.9440595030913134e-5), (7575176.294252521, -3.944029689915876e-5)),
    ),
    # two pairs at one natural frequency: the common mode is damped
    "cross-coupled": Oscillator(
        """G1 a 0 b 0 {x}
        G2 b 0 a 0 {x}
        Ra a 0 600
        La a 0 5n
        Ca a 0 500f
        Rb b 0 600
        Lb b 0 5n
        Cb b 0 500f""",
        2e-3, 1 / 600, "a", (1e9, 6e9), 333333333.3333333 + 19997222029.29419j,
        (-3666666666.6666665 + 19661016137.411503j,), 3183098861.837907,
        ((3183098861.837907, 8.333333333333333e-5), (3183098861.837907, -8.333333333333333e-5)),
    ),
    # the van der Pol equation at the origin: s² − μs + 1, ζ = −μ/2, μ = 0.1
    "negative conductance": Oscillator(
        """L1 a 0 1u
        C1 a 0 100p
        R1 a 0 2k
        G1 a 0 a 0 {x}""",
        -1.5e-3, -0.5e-3, "a", (5e6, 40e6), 5e6 + 99874921.7771909j, (), 15915494.309189534,
        ((15915494.309189534, 2.5e-5), (15915494.309189534, -2.5e-5)),
    ),
    "negative resistance": Oscillator(
        """L1 0 b 1u
        R1 b c 5
        C1 c d 100p
        E1 d 0 b c {x}""",
        -2.6, -1.0, "b", (5e6, 40e6), 4e6 + 99919967.97437437j, (), 15915494.309189534,
        ((15915494.309189534, 2.5e-5), (15915494.309189534, -2.5e-5)),
    ),
}  # fmt: skip
POINTS = 401
every_oscillator = pytest.mark.parametrize("name", OSCILLATORS)


def natural_hz(pole):
    return abs(pole) / (2 * np.pi)


def damping(pole):
    return -pole.real / abs(pole)


def swept(circuit, node, band_hz, points=POINTS):
    frequency = np.linspace(*band_hz, points)
    return response_set(frequency, circuit.driving_points(frequency, [node]), channels=[node])


def critical_pair(circuit, near_hz):
    """The exact pair next to the axis near a frequency."""
    poles = circuit.poles()
    upper = poles[poles.imag > 0]
    return upper[np.argmin(np.abs(upper - 2j * np.pi * near_hz))]


@every_oscillator
def test_nodal_analysis_has_the_published_poles(name):
    o = OSCILLATORS[name]
    found = o.circuit(o.value).poles()
    upper = found[found.imag >= 0]
    assert len(upper) == 1 + len(o.others)
    for pole in (o.pair, *o.others):
        # 1e-14: the figures have 16 digits
        assert np.min(np.abs(upper - pole)) < 1e-14 * abs(pole)


@every_oscillator
def test_start_condition(name):
    """At the threshold the pair lies on the axis; one part in a thousand aside, as published."""
    o = OSCILLATORS[name]
    on_axis = critical_pair(o.circuit(o.threshold), o.threshold_hz)
    # the threshold itself is rounded to 1e-16
    assert abs(damping(on_axis)) < 1e-14
    assert natural_hz(on_axis) == pytest.approx(o.threshold_hz, rel=1e-13)
    for factor, (f0, zeta) in zip((0.999, 1.001), o.around, strict=True):
        pair = critical_pair(o.circuit(factor * o.threshold), o.threshold_hz)
        assert natural_hz(pair) == pytest.approx(f0, rel=1e-13)
        assert damping(pair) == pytest.approx(zeta, abs=1e-14)


@every_oscillator
def test_identified_from_noise_free_data(name):
    """1e-9 on f0 and 1e-7 on ζ: plain vector fitting with known order reaches 2e-15."""
    o = OSCILLATORS[name]
    result = polefit.identify(swept(o.circuit(o.value), o.node, o.band_hz))
    mode = nearest_mode(result, o.pair)
    assert result.verdict == "unstable"
    assert mode.verdict == "unstable"
    assert mode.natural_frequency_hz.value == pytest.approx(natural_hz(o.pair), rel=1e-9)
    assert mode.damping_ratio.value == pytest.approx(damping(o.pair), abs=1e-7)
    assert mode.growth_rate_per_s.value == pytest.approx(o.pair.real, rel=1e-5)
    others = [m for m in result.modes if m is not mode and m.in_band]
    assert not [m for m in others if m.verdict != "stable"], "no other mode may threaten"


@pytest.mark.parametrize("side", [0, 1], ids=["0.999", "1.001"])
@every_oscillator
def test_sign_beside_the_start_condition(name, side):
    o = OSCILLATORS[name]
    f0, zeta = o.around[side]
    circuit = o.circuit((0.999, 1.001)[side] * o.threshold)
    result = polefit.identify(swept(circuit, o.node, o.band_hz))
    mode = nearest_mode(result, critical_pair(circuit, o.threshold_hz))
    assert mode.verdict == ("stable" if zeta > 0 else "unstable")
    assert result.verdict == mode.verdict
    assert mode.natural_frequency_hz.value == pytest.approx(f0, rel=1e-9)
    assert mode.damping_ratio.value == pytest.approx(zeta, abs=1e-7)
    # exact data: 1e-8 of the response is far above their rounding, and no spare pole hides a mode
    assert result.detection.relative.max() < 1e-8


@every_oscillator
def test_published_frequency_confirmed_above_the_start_condition_only(name):
    """The oscillation frequency at the threshold is the prediction, ± 2 %.

    One part in a thousand above the threshold it is confirmed, as much below it is refuted, and
    the mode that decays is shown with the published damping.
    """
    o = OSCILLATORS[name]
    answers = [
        polefit.confirm(
            swept(o.circuit(factor * o.threshold), o.node, o.band_hz), o.threshold_hz, 0.02
        )
        for factor in (0.999, 1.001)
    ]
    assert [answer.verdict for answer in answers] == ["refuted", "confirmed"]
    for answer, (f0, zeta) in zip(answers, o.around, strict=True):
        assert answer.mode.natural_frequency_hz.value == pytest.approx(f0, rel=1e-9)
        assert answer.mode.damping_ratio.value == pytest.approx(zeta, abs=1e-7)
        assert answer.mode.verdict == ("stable" if zeta > 0 else "unstable")


@every_oscillator
def test_a_prediction_beside_the_oscillation_is_refuted_but_not_passed(name):
    """15 % above the frequency of the growing pair, ± 5 %: nothing grows there."""
    o = OSCILLATORS[name]
    data = swept(o.circuit(o.value), o.node, o.band_hz)
    answer = polefit.confirm(data, near_hz=1.15 * natural_hz(o.pair), within=0.05)
    assert answer.verdict == "refuted"
    assert answer.overall == "unstable", "the status tells that a mode elsewhere grows"
    nearest = answer.identification.modes[answer.elsewhere[0]]
    assert nearest.natural_frequency_hz.value == pytest.approx(natural_hz(o.pair), rel=1e-9)


def test_two_pairs_at_one_frequency_are_not_averaged():
    """Cross-coupled pair: common mode ζ = +0.18333…, differential mode −1/60, same |p|."""
    o = OSCILLATORS["cross-coupled"]
    result = polefit.identify(swept(o.circuit(o.value), o.node, o.band_hz))
    dampings = sorted(m.damping_ratio.value for m in result.modes)
    assert dampings == pytest.approx([-1 / 60, 0.55 / 3], abs=1e-7)
    for mode in result.modes:
        assert mode.natural_frequency_hz.value == pytest.approx(o.threshold_hz, rel=1e-9)


def test_driven_differentially_only_the_growing_pair_shows():
    """(v_a − v_b) under a current from b to a: by symmetry the common mode has no residue."""
    o = OSCILLATORS["cross-coupled"]
    frequency = np.linspace(*o.band_hz, POINTS)
    z = o.circuit(o.value).impedances(frequency, [("a", "a"), ("a", "b"), ("b", "a"), ("b", "b")])
    result = polefit.identify(response_set(frequency, z[:, 0] - z[:, 1] - z[:, 2] + z[:, 3]))
    assert [m.verdict for m in result.modes] == ["unstable"]
    assert result.modes[0].damping_ratio.value == pytest.approx(-1 / 60, abs=1e-7)
