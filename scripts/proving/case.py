"""One case of the proving ground: noisy responses, and the truth behind them."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal, TypeAlias

import numpy as np

import polefit
from polefit.responses import Quantity
from proving.cramer_rao import ComplexArray, FloatArray, Known, Spread, bounds

Place: TypeAlias = Literal["inside", "edge", "outside"]

EDGE = 0.5
"""Half-widths by which a mode must ring inside the band to be counted as inside."""
BEYOND = 1.25
"""Up to this factor outside the band a mode is at its edge."""
DETECTABLE = 6.0
"""|σ| over its Cramér-Rao bound from which a mode can be expected to be found and judged."""

SMOOTH_TERMS = 4
"""Direct terms 1, s, s², s³ that stand for all far poles where there is no finite order."""


@dataclass(frozen=True)
class TrueMode:
    """A natural mode of the circuit, known exactly.

    Parameters
    ----------
    pole : complex
        rad/s, Im ≥ 0.
    growth_std, angular_std : float
        Cramér-Rao bounds of Re and Im of the pole, rad/s; infinite when buried in the noise.
    place : {"inside", "edge", "outside"}
        Where it rings, as seen from the sampled band.
    energy : float
        χ² by which the mode shows in the data.
    """

    pole: complex
    growth_std: float
    angular_std: float
    place: Place
    energy: float

    @property
    def detectability(self) -> float:
        """|σ| over its bound; zero when buried."""
        return abs(self.pole.real) / self.growth_std if self.growth_std > 0 else np.inf

    @property
    def growing(self) -> bool:
        """Whether it grows."""
        return self.pole.real > 0

    @property
    def frequency_hz(self) -> float:
        """Im p/2π."""
        return self.pole.imag / (2 * np.pi)

    @property
    def damping(self) -> float:
        """−Re p/|p|."""
        return -self.pole.real / abs(self.pole)


@dataclass(frozen=True, eq=False)
class Case:
    """Noisy responses with the truth.

    Parameters
    ----------
    name, family : str
        What it is.
    seed : int
        Makes it again.
    responses : polefit.ResponseSet
        What the tool is given.
    modes : tuple of TrueMode
        In and around the band, by frequency.
    noise : str
        The exact noise.
    circuit : str
        The netlist or its like, for reading.
    noise_relative : float
        Typical |noise| / |response|, for those who must be told.
    infinite : bool
        No finite order is exact (lines, delays).
    """

    name: str
    family: str
    seed: int
    responses: polefit.ResponseSet
    modes: tuple[TrueMode, ...]
    noise: str
    circuit: str = field(repr=False)
    noise_relative: float = 0.0
    infinite: bool = False

    @property
    def growing_inside(self) -> bool:
        """Whether a mode in the band grows."""
        return any(m.growing and m.place == "inside" for m in self.modes)

    @property
    def growing_edge(self) -> bool:
        """Whether a mode at the edge of the band, or a little beyond, grows."""
        return any(m.growing and m.place == "edge" for m in self.modes)

    @property
    def answer(self) -> Literal["unstable", "stable", "open"]:
        """What can be expected of a verdict.

        ``unstable``: a growing mode in the band is detectable. ``stable``: nothing grows in the
        band or at its edge, and every mode in the band is either detectable or buried in the
        noise altogether. ``open``: anything may be said but the contrary of the truth.
        """
        inside = [m for m in self.modes if m.place == "inside"]
        if any(m.growing and m.detectability >= DETECTABLE for m in inside):
            return "unstable"
        if self.growing_inside or self.growing_edge:
            return "open"
        seen = [m for m in inside if np.isfinite(m.growth_std)]
        return "stable" if all(m.detectability >= DETECTABLE for m in seen) else "open"


@dataclass(frozen=True)
class Noise:
    """A law of circular noise: standard deviation √((relative·|H|)² + absolute²), both parts.

    Parameters
    ----------
    relative : float
        Share of |H|.
    absolute : float
        Share of the root mean square of each channel.
    """

    relative: float = 0.0
    absolute: float = 0.0

    def spread(self, values: ComplexArray) -> Spread:
        """Return the standard deviation of each part of each sample."""
        rms = np.sqrt(np.mean(np.abs(values) ** 2, axis=0))
        std = np.hypot(self.relative * np.abs(values), self.absolute * rms) / np.sqrt(2)
        return Spread(std, std)

    def drawn(self, values: ComplexArray, generator: np.random.Generator) -> ComplexArray:
        """Return the values with noise."""
        spread = self.spread(values)
        parts = generator.standard_normal((2, *values.shape))
        return np.asarray(values + parts[0] * spread.first + 1j * parts[1] * spread.second)

    def __str__(self) -> str:
        terms = [(self.relative, "relative"), (self.absolute, "of the rms")]
        return " and ".join(f"{v:.2g} {what}" for v, what in terms if v) or "none"


def place(pole: complex, band_hz: tuple[float, float]) -> Place:
    """Tell where a mode rings: Im p, or |p| of a real pole, against the band.

    Parameters
    ----------
    pole : complex
        rad/s.
    band_hz : (float, float)
        Hertz.
    """
    low, high = (2 * np.pi * f for f in band_hz)
    at = pole.imag if pole.imag else abs(pole)
    margin = EDGE * abs(pole.real) if pole.imag else 0.5 * at
    if low + min(margin, 0.5 * at) <= at <= high - min(margin, 0.3 * high):
        return "inside"
    reach = 0.05 * (high - low)
    if min(low / BEYOND, low - reach) <= at <= max(high * BEYOND, high + margin):
        return "edge"
    return "outside"


def true_modes(known: Known, spread: Spread, direct: int = 2) -> tuple[TrueMode, ...]:
    """Return the modes of a known response that ring in or around its band, with bounds."""
    found = bounds(known, spread, direct)
    band = float(known.frequency_hz[0]), float(known.frequency_hz[-1])
    listed = [
        TrueMode(complex(p), float(g), float(a), place(complex(p), band), float(e))
        for p, g, a, e in zip(known.poles, found.growth, found.angular, found.energy, strict=True)
    ]
    around = [m for m in listed if band[0] / 5 <= abs(m.pole) / (2 * np.pi) <= band[1] * 5]
    return tuple(sorted(around, key=lambda m: (m.pole.imag, -m.pole.real)))


@dataclass(frozen=True, eq=False)
class Exact:
    """An exact system, to be sampled with noise.

    Parameters
    ----------
    known : Known
        Responses, poles, residues.
    channels : tuple of str or (str, str)
        Channels.
    circuit : str
        For reading.
    quantity : str
        What the responses are.
    infinite : bool
        No finite order is exact.
    """

    known: Known
    channels: tuple[str | tuple[str, str], ...]
    circuit: str
    quantity: Quantity = "impedance"
    infinite: bool = False


def noisy_case(
    family: str, seed: int, exact: Exact, noise: Noise, generator: np.random.Generator
) -> Case:
    """Add noise to an exact system and wrap it up.

    Parameters
    ----------
    family : str
        Family that it belongs to.
    seed : int
        Seed of the case.
    exact : Exact
        The system.
    noise : Noise
        The law.
    generator : numpy.random.Generator
        Draws the noise.
    """
    known = exact.known
    responses = polefit.ResponseSet.from_arrays(
        known.frequency_hz,
        noise.drawn(known.values, generator),
        channels=list(exact.channels),
        quantity=exact.quantity,
        reference_ohm=50.0 if exact.quantity == "scattering" else None,
    )
    return finished(family, seed, exact, responses, noise.spread(known.values), str(noise))


def finished(
    family: str,
    seed: int,
    exact: Exact,
    responses: polefit.ResponseSet,
    spread: Spread,
    noise: str,
) -> Case:
    """Wrap responses and their exact noise into a case."""
    known = exact.known
    size = np.abs(known.values)
    ratio: FloatArray = np.hypot(spread.first, spread.second) / np.where(size > 0, size, 1.0)
    return Case(
        name=f"{family} {seed}",
        family=family,
        seed=seed,
        responses=responses,
        modes=true_modes(known, spread, SMOOTH_TERMS if exact.infinite else 2),
        noise=noise,
        circuit=exact.circuit,
        noise_relative=float(np.median(ratio)),
        infinite=exact.infinite,
    )
