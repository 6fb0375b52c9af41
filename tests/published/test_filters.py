"""Filter prototypes with published poles: exact order, too high an order, zeros on the axis.

Pole tables: S. Winder, "Filter Design", Newnes 1998 (Butterworth, Chebyshev, Bessel; 4 to 5
digits, reprinted widely); ten digits from the closed forms, equal to SciPy's. Elliptic: textbook
table of second-order factors (M. E. Van Valkenburg, "Analog Filter Design", attribution from
memory), the figures recomputed from the degree equation.
"""

from dataclasses import dataclass

import numpy as np
import pytest
import scipy.signal
from rational import complex_noise, nearest_pole, response_set

import polefit
from polefit.engine.blocks import make_block
from polefit.engine.projection import solve
from polefit.engine.refinement import refine
from polefit.engine.vector_fitting import relocate, starting_sections


@dataclass(frozen=True)
class Prototype:
    """Low-pass prototype: poles once for each pair, squares of its zeros on the axis."""

    poles: tuple[complex, ...]
    squared_zeros: tuple[float, ...] = ()
    digits: float = 1e-10

    @property
    def order(self):
        return sum(2 if complex(p).imag else 1 for p in self.poles)

    def response(self, frequency):
        """H(jω) with H(0) = 1; `frequency` in units of ω, that is 2π Hz."""
        s = 1j * np.asarray(frequency)
        value = np.ones_like(s)
        for pole in self.poles:
            for p in {complex(pole), complex(pole).conjugate()}:
                value = value / (1 - s / p)
        for square in self.squared_zeros:
            value = value * (1 + s**2 / square)
        return value


def quadratic(c1, c0):
    """Upper root of s² + c1·s + c0."""
    return complex(-c1 / 2, np.sqrt(c0 - c1**2 / 4))


TABLE = {
    "Butterworth 2": Prototype((-0.7071067812 + 0.7071067812j,)),
    "Butterworth 3": Prototype((-1, -0.5 + 0.8660254038j)),
    "Butterworth 4": Prototype((-0.9238795325 + 0.3826834324j, -0.3826834324 + 0.9238795325j)),
    "Butterworth 5": Prototype((-1, -0.8090169944 + 0.5877852523j, -0.3090169944 + 0.9510565163j)),
    "Chebyshev 0.5 dB 2": Prototype((-0.7128122568 + 1.0040424859j,)),
    "Chebyshev 0.5 dB 3": Prototype((-0.6264564863, -0.3132282432 + 1.0219274910j)),
    "Chebyshev 0.5 dB 4": Prototype((-0.4233397588 + 0.4209457310j, -0.1753530696 + 1.0162528927j)),
    "Chebyshev 0.5 dB 5": Prototype(
        (-0.3623196242, -0.2931227334 + 0.6251768359j, -0.1119629213 + 1.0115573694j)
    ),
    "Bessel 2": Prototype((-1.5 + 0.8660254038j,)),
    "Bessel 3": Prototype((-2.3221853546, -1.8389073227 + 1.7543809598j)),
    "Bessel 4": Prototype((-2.8962106028 + 0.8672341289j, -2.1037893972 + 2.6574180419j)),
    "Bessel 5": Prototype(
        (-3.6467385953, -3.3519563992 + 1.7426614162j, -2.3246743032 + 3.5710229203j)
    ),
    "elliptic 2": Prototype((quadratic(1.031534, 1.603193),), (3.927051,), 1e-5),
    "elliptic 3": Prototype((-0.7669521335, -0.2264281932 + 1.0478065615j), (2.806014,)),
    "elliptic 4": Prototype(
        (quadratic(0.254962, 1.060438), quadratic(0.920006, 0.471827)), (2.535553, 12.099310), 1e-5
    ),
    "elliptic 5": Prototype(
        (-0.425971, quadratic(0.163462, 1.031894), quadratic(0.570236, 0.576012)),
        (2.425515, 5.437645), 1e-5,
    ),
}  # fmt: skip
# As printed: the normalised denominators that designers copy, to the digits printed.
WINDER = {
    "Chebyshev 0.5 dB 2": (0.71281 - 1.00404j,),
    "Chebyshev 0.5 dB 3": (0.62646, 0.31323 - 1.02193j),
    "Chebyshev 0.5 dB 4": (0.42334 - 0.42095j, 0.17535 - 1.01625j),
    "Chebyshev 0.5 dB 5": (0.36232, 0.29312 - 0.62518j, 0.11196 - 1.01156j),
}
SCIPY = {
    "Butterworth": lambda n: scipy.signal.buttap(n)[1],
    "Chebyshev 0.5 dB": lambda n: scipy.signal.cheb1ap(n, 0.5)[1],
    "Bessel": lambda n: scipy.signal.besselap(n, norm="delay")[1],
}
every_prototype = pytest.mark.parametrize("name", TABLE)
FREQUENCY = np.linspace(0.01, 10, 401)
HZ = FREQUENCY / (2 * np.pi)


def fit_of_order(values, order):
    """Relocate and refine at a given order; poles in rad/s."""
    scale = FREQUENCY[-1]
    table = values[np.newaxis]
    block = make_block(1j * FREQUENCY / scale, table, np.ones((1, 2, table.shape[1])))
    sections = starting_sections(FREQUENCY[0] / scale, 1.0, order)
    for _ in range(12):
        sections = relocate([block], sections, 1)
    solution = refine([block], solve([block], sections, 1))
    return scale * solution.sections.poles()


@pytest.mark.parametrize("name", [n for n in TABLE if n.rsplit(" ", 1)[0] in SCIPY])
def test_table_equals_scipy(name):
    family, order = name.rsplit(" ", 1)
    reference = SCIPY[family](int(order))
    for pole in TABLE[name].poles:
        # ten digits are printed
        assert np.min(np.abs(reference - pole)) < 1e-10


@pytest.mark.parametrize("name", WINDER)
def test_table_equals_the_printed_one(name):
    """Five decimals: half a unit of the last, and a little for its rounding."""
    for exact, printed in zip(TABLE[name].poles, WINDER[name], strict=True):
        assert abs((exact + printed).real) < 0.6e-5
        assert abs((exact + printed).imag) < 0.6e-5


@every_prototype
def test_exact_order_gives_exact_poles(name):
    prototype = TABLE[name]
    found = fit_of_order(prototype.response(FREQUENCY), prototype.order)
    assert len(found) == prototype.order
    for pole in prototype.poles:
        assert np.min(np.abs(found - pole)) < 1e-9 * abs(pole)


@every_prototype
def test_identified_without_being_told_the_order(name):
    prototype = TABLE[name]
    result = polefit.identify(response_set(HZ, prototype.response(FREQUENCY), "transfer"))
    assert result.verdict == "stable"
    for pole in prototype.poles:
        assert abs(nearest_pole(result, pole) - pole) < 1e-9 * abs(pole)
    # all these poles lie inside 0.01 … 10: each is one claimed mode, and nothing else is
    assert len([m for m in result.modes if m.in_band]) == len(prototype.poles)


@pytest.mark.parametrize("name", [n for n in TABLE if n.startswith("elliptic")])
def test_zeros_on_the_axis_are_never_poles(name):
    prototype = TABLE[name]
    values = prototype.response(FREQUENCY)
    noise = complex_noise(np.random.default_rng(5), values.shape, (1e-4 * np.abs(values)) ** 2)
    for data in (values, values + noise):
        result = polefit.identify(response_set(HZ, data, "transfer"))
        assert result.verdict == "stable"
        for square in prototype.squared_zeros:
            # a tenth of the zero's frequency: all poles of the prototypes are farther off
            claimed = [abs(m.pole_rad_per_s - 1j * np.sqrt(square)) for m in result.modes]
            assert min(claimed) > 0.1 * np.sqrt(square)


@every_prototype
def test_four_orders_too_many_add_no_significant_pair(name):
    """Noise at 1e-4 of each sample, where spare poles like to go, and every true pole claimed."""
    prototype = TABLE[name]
    values = prototype.response(FREQUENCY)
    generator = np.random.default_rng(11)
    values = values + complex_noise(generator, values.shape, (1e-4 * np.abs(values)) ** 2)
    result = polefit.identify(response_set(HZ, values, "transfer"))
    spare = [
        m
        for m in result.modes
        if m.in_band
        and min(abs(m.pole_rad_per_s - p) for p in prototype.poles) > 0.1 * abs(m.pole_rad_per_s)
    ]
    assert not spare
    assert result.verdict == "stable"
