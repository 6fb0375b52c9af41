"""What was found: modes, suspect loops, the model behind them and how far it may be trusted."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any, Literal, TypeAlias

import numpy as np
from numpy.typing import NDArray

from polefit.estimates import Estimate
from polefit.responses import Channel, ResponseSet, Source

Verdict: TypeAlias = Literal["unstable", "undecided", "stable"]


@dataclass(frozen=True)
class Evidence:
    """One named test of a mode, with its outcome.

    Parameters
    ----------
    name : str
        Short name, such as "stable-model misfit".
    passed : bool or None
        Whether the test supports the mode's verdict; None when it could not be made.
    detail : str
        One sentence with the numbers.
    """

    name: str
    passed: bool | None
    detail: str

    def __str__(self) -> str:
        mark = {True: "passed", False: "failed", None: "not made"}[self.passed]
        return f"{self.name}: {mark}"


@dataclass(frozen=True)
class NodeView:
    """How one mode shows at one channel.

    Parameters
    ----------
    channel : Channel
        Where.
    residue : complex
        Residue of the response at the pole, in its unit times rad/s.
    residue_std : float or None
        Standard uncertainty of |residue|.
    share : float
        |residue| / |σ or half the spacing| relative to the channel's rms response: how
        strongly the mode shapes this channel (0 … large).
    leverage : Estimate or None
        Damping leverage −dσ/dG = Re(residue) for driving-point impedances, in 1/(s·S).
    """

    channel: Channel
    residue: complex
    residue_std: float | None = None
    share: float = 0.0
    leverage: Estimate | None = None


@dataclass(frozen=True)
class Mode:
    """One natural mode of the circuit as terminated: a conjugate pole pair, or a real pole.

    Parameters
    ----------
    pole_rad_per_s : complex
        The pole, with non-negative imaginary part.
    covariance : ((float, float), (float, float))
        Covariance of (Re, Im) of the pole in (rad/s)².
    frequency_hz, natural_frequency_hz, damping_ratio, growth_rate_per_s : Estimate
        Im(p)/2π, |p|/2π, −Re(p)/|p| and Re(p).
    verdict : {"unstable", "undecided", "stable"}
        By the sign of the growth rate at the stated confidence, all evidence agreeing.
    probability_unstable : float
        Probability that Re(p) > 0 given data and model.
    significance : float
        Standard deviations by which the mode stands out of the noise, over all channels.
    in_band : bool
        Whether it lies inside the band, so that it may decide the verdict.
    evidence : tuple of Evidence
        The tests it passed or failed.
    nodes : tuple of NodeView
        One for each channel, strongest first.
    subharmonic : bool or None
        Under a periodic drive, where frequencies are folded into 0 to half that of the drive:
        whether the mode sits exactly at half of it and so divides it by two. None without one.
    seen_hz : tuple of float
        Under a periodic drive, where in the sweep its lines show, the strongest first. Residues
        are those of the first.
    """

    pole_rad_per_s: complex
    covariance: tuple[tuple[float, float], tuple[float, float]]
    frequency_hz: Estimate
    natural_frequency_hz: Estimate
    damping_ratio: Estimate
    growth_rate_per_s: Estimate
    verdict: Verdict
    probability_unstable: float
    significance: float
    in_band: bool
    evidence: tuple[Evidence, ...] = ()
    nodes: tuple[NodeView, ...] = ()
    subharmonic: bool | None = None
    seen_hz: tuple[float, ...] = ()

    @property
    def real(self) -> bool:
        """Whether the mode is a real pole, which grows or decays without ringing."""
        return self.pole_rad_per_s.imag == 0


@dataclass(frozen=True)
class BackgroundPole:
    """A pole of the model that is not claimed as a mode, with the reason.

    Parameters
    ----------
    pole_rad_per_s : complex
        The pole, with non-negative imaginary part; under a periodic drive not folded, and of
        either sign.
    reason : str
        One sentence.
    """

    pole_rad_per_s: complex
    reason: str


@dataclass(frozen=True)
class Loop:
    """A suspect loop: one mode together with the nodes at which it shows.

    Parameters
    ----------
    mode : int
        Index into the modes.
    nodes : tuple of str
        Node names, strongest leverage first.
    """

    mode: int
    nodes: tuple[str, ...]


@dataclass(frozen=True)
class FitQuality:
    """How well the model describes the data.

    Parameters
    ----------
    order : int
        Number of poles.
    order_reason : str
        Why this order was taken.
    rms_relative : float
        Root mean square of |model − data| / |data| over all samples.
    noise_relative : float
        Typical standard deviation of the noise over |data|, both parts together.
    noise_origin : str
        The noise law, and where it came from.
    residual_white : bool
        Whether the residual looks like noise.
    stable_model_misfit : float or None
        Misfit of the best model without right-half-plane poles over that of the free model.
    """

    order: int
    order_reason: str
    rms_relative: float
    noise_relative: float
    noise_origin: str
    residual_white: bool
    stable_model_misfit: float | None = None


@dataclass(frozen=True, eq=False)
class RationalModel:
    """H_k(s) = (Σ_i residues[i, k] / (s − poles[i]) + constant[k] + proportional[k]·s)·delay_k(s).

    Parameters
    ----------
    poles : (n,) complex ndarray
        rad/s; conjugates are both listed. Of a periodically driven circuit those lines that the
        sweep shows, none of which implies its conjugate.
    residues : (n, K) complex ndarray
        In the unit of the responses times rad/s.
    constant, proportional : (K,) ndarray
        Direct terms; complex for a periodically driven circuit.
    channels : tuple of Channel
        The K channels.
    delay_s : (K,) float ndarray, optional
        Delays in front of the ports, delay_k(s) = exp(−s·delay_s[k]); none by default.
    """

    poles: NDArray[np.complex128]
    residues: NDArray[np.complex128]
    constant: NDArray[np.float64] | NDArray[np.complex128]
    proportional: NDArray[np.float64] | NDArray[np.complex128]
    channels: tuple[Channel, ...]
    delay_s: NDArray[np.float64] | None = None

    def response(self, frequency_hz: NDArray[np.float64]) -> NDArray[np.complex128]:
        """Evaluate the model.

        Parameters
        ----------
        frequency_hz : (N,) float ndarray
            Hertz.

        Returns
        -------
        (N, K) complex ndarray
        """
        s = 2j * np.pi * np.asarray(frequency_hz, dtype=np.float64)
        total: NDArray[np.complex128] = (1.0 / (s[:, np.newaxis] - self.poles)) @ self.residues
        total += self.constant + s[:, np.newaxis] * self.proportional
        if self.delay_s is not None:
            total *= np.exp(-s[:, np.newaxis] * self.delay_s)
        return total


Stretch: TypeAlias = tuple[float, float]
"""From … to, in Hz."""


@dataclass(frozen=True, eq=False)
class Detection:
    """What would have gone unnoticed: the smallest hidden mode found with the stated power.

    Found means that the run would not have been called stable. Each limit holds for a mode that
    shows at this one channel only, with the least favourable phase, wherever it lies between the
    samples.

    Parameters
    ----------
    frequency_hz : (M,) float ndarray
        Frequencies at which a hidden mode was supposed, over the whole band.
    damping_ratio : float
        Its damping ratio; negative grows.
    power : float
        Probability with which a mode at the limit would have been found.
    residue : (M, K) float ndarray
        Smallest |residue| found, for each channel, in the unit of the response times rad/s;
        infinite where the samples say nothing.
    response : (M, K) float ndarray
        |H| of the model around each frequency, in the unit of the response: the larger of the
        value there and the median of the neighbourhood, so that a notch is not taken for silence.
    leverage : (M, K) float ndarray
        Smallest damping leverage |−dσ/dG| found, in 1/(s·S); NaN for channels that are no
        driving-point impedance.
    blind_hz : tuple of tuple of (float, float)
        For each channel, the stretches of the band where it is blind: where nothing is found
        below the height of the response itself.
    blind_everywhere_hz : tuple of (float, float)
        Stretches where every channel is blind.
    blind_share : float
        Share of the samples that these hold.
    """

    frequency_hz: NDArray[np.float64]
    damping_ratio: float
    power: float
    residue: NDArray[np.float64]
    response: NDArray[np.float64]
    leverage: NDArray[np.float64]
    blind_hz: tuple[tuple[Stretch, ...], ...]
    blind_everywhere_hz: tuple[Stretch, ...] = ()
    blind_share: float = 0.0

    @property
    def peak(self) -> NDArray[np.float64]:
        """Limits as the height |residue|/|σ| of the peak, (M, K), in the unit of the response.

        A shunt resistor takes a mode that shows at a node with this height to the axis, to first
        order, when it has as many ohms: above it none would help.
        """
        ratio = self.damping_ratio
        sigma = 2 * np.pi * self.frequency_hz * abs(ratio) / np.sqrt(1 - ratio**2)
        height: NDArray[np.float64] = self.residue / sigma[:, np.newaxis]
        return height

    @property
    def relative(self) -> NDArray[np.float64]:
        """Limits as the height of the peak over that of the response, (M, K); 1 is as high."""
        with np.errstate(divide="ignore", invalid="ignore"):
            ratio: NDArray[np.float64] = self.peak / self.response
        return np.where(np.isnan(ratio), np.inf, ratio)


@dataclass(frozen=True, eq=False)
class Identification:
    """The answer for one circuit: verdict, modes, loops, and what they rest on.

    Parameters
    ----------
    verdict : {"unstable", "undecided", "stable"}
        Of the whole run.
    reason : str
        One sentence that justifies it.
    confidence : float
        Confidence of the verdicts.
    band_hz : (float, float)
        Band in which modes may decide.
    responses : tuple of ResponseSet
        The data, as used.
    modes : tuple of Mode
        Most dangerous first.
    background : tuple of BackgroundPole
        Poles of the model that are not claimed.
    loops : tuple of Loop
        Suspect loops, for the modes that are unstable, undecided or lightly damped.
    fit : FitQuality
        How well the model describes the data.
    model : RationalModel
        The model itself.
    detection : Detection or None
        What would have gone unnoticed.
    next_points_hz : tuple of float
        What to simulate next.
    notes : tuple of str
        What was assumed, and what limits the verdict.
    noise_std : tuple of (N, K) float ndarray
        Standard deviation of the noise of each complex sample (both parts together), one array
        for each of `responses`, in their unit. Empty where only ``fit.noise_relative`` is known.
    """

    verdict: Verdict
    reason: str
    confidence: float
    band_hz: tuple[float, float]
    responses: tuple[ResponseSet, ...]
    modes: tuple[Mode, ...]
    background: tuple[BackgroundPole, ...]
    loops: tuple[Loop, ...]
    fit: FitQuality
    model: RationalModel = field(repr=False)
    detection: Detection | None = field(default=None, repr=False)
    next_points_hz: tuple[float, ...] = ()
    notes: tuple[str, ...] = ()
    noise_std: tuple[NDArray[np.float64], ...] = field(default=(), repr=False)

    @property
    def quantity(self) -> str:
        """Quantity of the responses."""
        return self.responses[0].quantity

    @property
    def pump_hz(self) -> float | None:
        """Fundamental of the periodic drive, if any."""
        return self.responses[0].pump_hz

    @property
    def termination(self) -> str:
        """The terminations for which the modes hold."""
        return "; ".join(dict.fromkeys(r.termination for r in self.responses))

    @property
    def channels(self) -> tuple[Channel, ...]:
        """All channels, in the order of the model."""
        return tuple(c for r in self.responses for c in r.channels)

    @property
    def sources(self) -> tuple[Source, ...]:
        """The files behind the responses."""
        return tuple(r.source for r in self.responses if r.source is not None)

    def to_dict(self) -> dict[str, Any]:
        """Return plain data in the layout of the schema ``polefit.identification``."""
        from polefit.report.json import identification_dict

        return identification_dict(self)

    def __repr__(self) -> str:
        from polefit.report.headline import short_form

        return short_form(self)

    def __str__(self) -> str:
        from polefit.report.text import identification_text

        return identification_text(self)

    def _repr_html_(self) -> str:
        from polefit.report.html import identification_fragment

        return identification_fragment(self)
