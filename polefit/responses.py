"""What was simulated: channels, frequency responses and where they came from.

Frequencies are in hertz here; the engine works in rad/s.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any, Literal, TypeAlias, get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray

from polefit.channels import Channel as Channel
from polefit.channels import as_channel as as_channel
from polefit.channels import port_channels as port_channels
from polefit.errors import ArgumentError, DataError
from polefit.estimates import si
from polefit.precision import FrequencyPrecision, Precision

if TYPE_CHECKING:
    import skrf

FloatArray: TypeAlias = NDArray[np.float64]
ComplexArray: TypeAlias = NDArray[np.complex128]
Quantity: TypeAlias = Literal[
    "impedance",
    "admittance",
    "scattering",
    "transfer",
    "hybrid",
    "inverse-hybrid",
    "return-difference",
    "loop-gain",
]
QUANTITIES: tuple[str, ...] = get_args(Quantity)
UNITS: dict[str, str] = {"impedance": "Ω", "admittance": "S"}

_TERMINATION = {
    "impedance": "every probed port open: the probe adds no load",
    "admittance": "every probed port shorted: the probe drives with a voltage source",
    "scattering": "every port loaded with its reference resistance",
    "transfer": "as terminated in the simulation, with its source in place",
    "hybrid": "port 1 open, port 2 shorted",
    "inverse-hybrid": "port 1 shorted, port 2 open",
    "return-difference": "as terminated in the simulation",
    "loop-gain": "as terminated in the simulation, loop closed",
}


@dataclass(frozen=True)
class Source:
    """Where a response set came from and what was assumed when it was read.

    Parameters
    ----------
    file : str
        File name as given by the user.
    sha256 : str
        Hexadecimal digest of the file's bytes.
    format : str
        Short name of the format, such as "Touchstone 1.1".
    assumptions : tuple of str
        One sentence for every reading that was not forced by the file.
    """

    file: str
    sha256: str
    format: str
    assumptions: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False)
class ResponseSet:
    """K complex frequency responses of one circuit on one frequency axis.

    Use :meth:`from_arrays`, :meth:`from_network` or :func:`polefit.read`.

    Parameters
    ----------
    frequency_hz : (N,) float ndarray
        Strictly increasing, finite, non-negative, in hertz. Read-only.
    values : (N, K) complex ndarray
        The responses: ohm, siemens or dimensionless as `quantity` says. Read-only.
    channels : tuple of Channel
        K distinct channels.
    quantity : str
        One of ``polefit.responses.QUANTITIES``.
    pump_hz : float, optional
        Fundamental of the periodic drive, for conversion responses.
    reference_ohm : tuple of float, optional
        Reference resistance of each port, for scattering data.
    termination : str
        The terminations for which the modes of these data hold.
    precision : Precision, optional
        How the numbers were printed; None for full double precision.
    sample_std : (N, K) float ndarray, optional
        Standard uncertainty of each real and imaginary part, where known beforehand.
    source : Source, optional
        File, digest, format and assumptions.
    frequency_precision : FrequencyPrecision, optional
        How the frequencies were printed; None for full double precision.

    Raises
    ------
    DataError
        If the arrays cannot be a set of frequency responses.
    ArgumentError
        If a name, the quantity or the pump frequency is not usable.
    """

    frequency_hz: FloatArray
    values: ComplexArray
    channels: tuple[Channel, ...]
    quantity: Quantity
    pump_hz: float | None = None
    reference_ohm: tuple[float, ...] | None = None
    termination: str = ""
    precision: Precision | None = None
    sample_std: FloatArray | None = field(default=None, repr=False)
    source: Source | None = None
    frequency_precision: FrequencyPrecision | None = None

    def __post_init__(self) -> None:
        if self.quantity not in QUANTITIES:
            raise ArgumentError(
                f"quantity: {self.quantity!r} is not known; use one of {', '.join(QUANTITIES)}"
            )
        frequency = _frozen(self.frequency_hz, np.float64, "frequency_hz")
        values = _frozen(self.values, np.complex128, "values")
        channels = tuple(as_channel(channel) for channel in self.channels)
        _check_axis(frequency)
        _check_values(values, frequency.size, channels)
        object.__setattr__(self, "frequency_hz", frequency)
        object.__setattr__(self, "values", values)
        object.__setattr__(self, "channels", channels)
        if self.pump_hz is not None:
            pump_hz = as_positive("pump_hz", self.pump_hz, "frequency; give hertz")
            object.__setattr__(self, "pump_hz", pump_hz)
        object.__setattr__(self, "reference_ohm", _as_references(self.reference_ohm))
        if self.sample_std is not None:
            std = _frozen(self.sample_std, np.float64, "sample_std")
            if std.shape != values.shape or not np.all(np.isfinite(std) & (std >= 0)):
                raise DataError(
                    "sample_std: must be finite, non-negative and of the shape of values"
                )
            object.__setattr__(self, "sample_std", std)
        if not self.termination:
            object.__setattr__(self, "termination", self._default_termination())

    def _default_termination(self) -> str:
        text = _TERMINATION[self.quantity]
        if self.quantity == "scattering" and self.reference_ohm:
            listed = ", ".join(f"{r:g}" for r in dict.fromkeys(self.reference_ohm))
            text += f" ({listed} Ω)"
        return text

    @classmethod
    def from_arrays(
        cls,
        frequency_hz: ArrayLike,
        values: ArrayLike,
        *,
        channels: Iterable[str | tuple[str, str] | Channel] | str,
        quantity: Quantity,
        pump_hz: float | None = None,
        reference_ohm: float | Sequence[float] | None = None,
        sample_std: ArrayLike | None = None,
    ) -> ResponseSet:
        """Build a response set from arrays.

        Parameters
        ----------
        frequency_hz : (N,) array_like of float
            Hertz, strictly increasing.
        values : (N,) or (N, K) array_like of complex
            Responses in ohm, siemens or dimensionless.
        channels : iterable of str or (str, str)
            K names (driving-point responses) or (output, input) pairs.
        quantity : str
            What the values are.
        pump_hz : float, optional
            Fundamental of the periodic drive.
        reference_ohm : float or sequence of float, optional
            Reference resistance of the ports, for scattering data.
        sample_std : (N,) or (N, K) array_like of float, optional
            Standard uncertainty of each real and imaginary part, where known.

        Returns
        -------
        ResponseSet

        Raises
        ------
        DataError, ArgumentError
            With the argument and the remedy in the message.

        Examples
        --------
        >>> import numpy as np, polefit
        >>> f = np.linspace(1e9, 2e9, 101)
        >>> z = 50 / (1 + 1j * f / 1e9)
        >>> polefit.ResponseSet.from_arrays(f, z, channels=["gate2"], quantity="impedance").points
        101
        """
        names = [channels] if isinstance(channels, str | Channel) else list(channels)
        table = np.asarray(values)
        if table.ndim == 1:
            table = table[:, np.newaxis]
        std = None if sample_std is None else np.asarray(sample_std)
        if std is not None and std.ndim == 1:
            std = std[:, np.newaxis]
        return cls(
            frequency_hz=np.asarray(frequency_hz),
            values=table,
            channels=tuple(as_channel(name) for name in names),
            quantity=quantity,
            pump_hz=pump_hz,
            reference_ohm=_as_references(reference_ohm),
            sample_std=std,
        )

    @classmethod
    def from_network(
        cls, network: skrf.Network, *, ports: Sequence[str] | None = None
    ) -> ResponseSet:
        """Build a scattering response set from a scikit-rf ``Network``.

        Parameters
        ----------
        network : skrf.Network
            Its reference impedances must be real and constant over frequency.
        ports : sequence of str, optional
            Port names; by default the network's own port names, else ``port1`` …

        Returns
        -------
        ResponseSet
            All n² scattering parameters, row by row.

        Raises
        ------
        DataError
            If a reference impedance is complex or varies with frequency.
        """
        s = np.asarray(network.s)
        count = s.shape[1]
        reference = np.asarray(network.z0)
        if np.any(reference.imag != 0) or np.any(reference != reference[:1]):
            raise DataError(
                "network: reference impedances are complex or vary with frequency; "
                "renormalise to a real resistance first (Network.renormalize)"
            )
        names = ports or network.port_names or [f"port{i + 1}" for i in range(count)]
        if len(set(names)) != count:
            raise DataError(f"ports: {len(set(names))} different names for {count} ports")
        return cls(
            frequency_hz=np.asarray(network.f, dtype=np.float64),
            values=s.reshape(len(s), count * count),
            channels=port_channels(names),
            quantity="scattering",
            reference_ohm=tuple(float(r) for r in reference[0].real),
        )

    @property
    def points(self) -> int:
        """Number of frequencies N."""
        return int(self.frequency_hz.size)

    @property
    def band_hz(self) -> tuple[float, float]:
        """Lowest and highest frequency in hertz."""
        return float(self.frequency_hz[0]), float(self.frequency_hz[-1])

    @property
    def unit(self) -> str:
        """Unit of the values, empty for a ratio."""
        return UNITS.get(self.quantity, "")

    def frequency_rounding_std(self, frequency_hz: FloatArray | None = None) -> FloatArray:
        """Return the standard uncertainty of each frequency that printing has left.

        Parameters
        ----------
        frequency_hz : (N,) float ndarray, optional
            Frequencies of this set, in hertz; by default all.

        Returns
        -------
        (N,) float ndarray
            In hertz; zeros where the frequencies are exact or nothing is known.
        """
        at = self.frequency_hz if frequency_hz is None else frequency_hz
        if self.frequency_precision is None:
            return np.zeros(at.shape)
        return self.frequency_precision.frequency_rounding_std(at)

    def in_band(self, low_hz: float, high_hz: float) -> ResponseSet:
        """Return the points with low_hz <= f <= high_hz.

        Raises
        ------
        ArgumentError
            If the band is reversed or holds no point.
        """
        if not low_hz < high_hz:
            raise ArgumentError(
                f"band_hz: {si(low_hz, 'Hz')} to {si(high_hz, 'Hz')} is empty; give low, then high"
            )
        keep = (self.frequency_hz >= low_hz) & (self.frequency_hz <= high_hz)
        if not keep.any():
            low, high = self.band_hz
            raise ArgumentError(
                f"{self._place()}band_hz: no point between {si(low_hz, 'Hz')} and "
                f"{si(high_hz, 'Hz')}; the data cover {si(low, 'Hz')} to {si(high, 'Hz')}"
            )
        return replace(
            self,
            frequency_hz=self.frequency_hz[keep],
            values=self.values[keep],
            sample_std=None if self.sample_std is None else self.sample_std[keep],
        )

    def select(self, names: Iterable[str]) -> ResponseSet:
        """Return the channels whose output is one of `names`, in that order.

        Raises
        ------
        ArgumentError
            If a name fits no channel, or none is given.
        """
        columns: list[int] = []
        for name in [names] if isinstance(names, str) else names:
            found = [i for i, c in enumerate(self.channels) if name in (c.output, str(c))]
            if not found:
                listed = ", ".join(dict.fromkeys(c.output for c in self.channels))
                raise ArgumentError(
                    f"{self._place()}select: no channel {name!r}; the data hold {listed}"
                )
            columns.extend(i for i in found if i not in columns)
        if not columns:
            raise ArgumentError("select: names no channel; give at least one, or leave it out")
        return replace(
            self,
            values=self.values[:, columns],
            channels=tuple(self.channels[i] for i in columns),
            sample_std=None if self.sample_std is None else self.sample_std[:, columns],
        )

    def _place(self) -> str:
        """Begin a message with the file that the data came from."""
        return "" if self.source is None else f"{self.source.file}: "

    def __repr__(self) -> str:
        low, high = self.band_hz
        return (
            f"<ResponseSet {self.quantity}: {self.points} points, {low:g} to {high:g} Hz, "
            f"{len(self.channels)} channels>"
        )


def _as_references(value: float | Sequence[float] | None) -> tuple[float, ...] | None:
    if value is None:
        return None
    try:
        listed = np.atleast_1d(np.asarray(value, dtype=np.float64))
    except (TypeError, ValueError):
        listed = np.zeros(0)
    if listed.ndim != 1 or not listed.size or not np.all(np.isfinite(listed) & (listed > 0)):
        raise ArgumentError("reference_ohm: give positive resistances in ohm")
    return tuple(float(r) for r in listed)


def as_positive(name: str, value: Any, kind: str) -> float:
    """Return a positive, finite number, or raise ArgumentError naming `name` and the `kind`."""
    try:
        number = float(value)
    except (TypeError, ValueError):
        number = np.nan
    if not 0 < number < np.inf:
        raise ArgumentError(f"{name}: {value!r} is not a positive {kind}")
    return number


def _frozen(array: Any, dtype: Any, name: str) -> Any:
    """Return `array` if nobody can write to it, else a read-only copy."""
    if (
        type(array) is np.ndarray
        and array.dtype == dtype
        and array.base is None
        and array.flags.c_contiguous
        and not array.flags.writeable
    ):
        return array  # large responses are handed on often; copies would add up
    if np.iscomplexobj(array) and not np.issubdtype(dtype, np.complexfloating):
        raise DataError(f"{name}: complex numbers; give their real part")
    try:
        copy = np.array(array, dtype=dtype, order="C")
    except (TypeError, ValueError) as error:
        raise DataError(f"{name}: not an array of numbers; convert it first") from error
    copy.flags.writeable = False
    return copy


def _check_axis(frequency: FloatArray) -> None:
    if frequency.ndim != 1 or frequency.size == 0:
        raise DataError("frequency_hz: must be a one-dimensional, non-empty array of hertz")
    if not np.all(np.isfinite(frequency)):
        at = int(np.flatnonzero(~np.isfinite(frequency))[0])
        raise DataError(f"frequency_hz[{at}] is not finite; remove or mend that point")
    if frequency[0] < 0:
        raise DataError(f"frequency_hz[0] is {frequency[0]:g}, negative; frequencies start at 0")
    steps = np.diff(frequency)
    if np.any(steps <= 0):
        at = int(np.flatnonzero(steps <= 0)[0])
        kind = "repeated" if steps[at] == 0 else "falling"
        raise DataError(
            f"frequency_hz[{at + 1}] = {frequency[at + 1]:.9g} Hz is {kind}; "
            "sort the points and keep one of each"
        )


def _check_values(values: ComplexArray, points: int, channels: tuple[Channel, ...]) -> None:
    if values.ndim != 2 or values.shape[0] != points:
        raise DataError(
            f"values: shape {values.shape} does not fit {points} frequencies; give (N,) or (N, K)"
        )
    if not values.shape[1]:
        raise DataError("values: no response; give at least one")
    if values.shape[1] != len(channels):
        raise DataError(
            f"channels: {len(channels)} given for {values.shape[1]} responses; give one for each"
        )
    if len(set(channels)) != len(channels):
        twice = next(c for c in channels if channels.count(c) > 1)
        raise DataError(f"channels: {twice} is given twice; each channel may appear once")
    if not np.all(np.isfinite(values)):
        row, column = (int(i) for i in np.argwhere(~np.isfinite(values))[0])
        raise DataError(
            f"values[{row}, {column}] ({channels[column]}) is not finite; remove or mend that point"
        )
