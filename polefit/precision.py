"""How a text file prints its numbers, and the rounding noise that this leaves."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True)
class Printed:
    """How one number of a text file was printed.

    Give `decimals` for a fixed number of places behind the decimal mark, else `significant`.

    Parameters
    ----------
    significant : int, optional
        Significant digits.
    decimals : int, optional
        Decimal places; when given it decides the quantum.
    """

    significant: int | None = None
    decimals: int | None = None

    def quantum(self, printed: FloatArray) -> FloatArray:
        """Return one unit of the last printed digit for each number, zero where unknown."""
        if self.decimals is not None:
            return np.full(printed.shape, 10.0**-self.decimals)
        if self.significant is None:
            return np.zeros(printed.shape)
        size = np.abs(printed)
        # Scaling and |x| may leave a printed 1.000 a few units of the last bit below 1.
        size *= 1 + 3e-15
        exponent = np.floor(np.log10(np.where(size > 0, size, 1.0)))
        return np.where(size > 0, 10.0 ** (exponent + 1 - self.significant), 0.0)


@dataclass(frozen=True)
class FrequencyPrecision:
    """How a text file prints its frequencies.

    Parameters
    ----------
    printed : Printed
        Precision of the printed number.
    scale_hz : float
        frequency = scale_hz * printed number (unit prefix).
    exact : bool
        Whether nothing was rounded away: the frequencies lie on a grid that the digits hold.
    """

    printed: Printed
    scale_hz: float = 1.0
    exact: bool = False

    def quantum_hz(self, frequency_hz: FloatArray) -> FloatArray:
        """Return one unit of the last printed digit of each frequency, zero where unknown."""
        quantum: FloatArray = self.scale_hz * self.printed.quantum(frequency_hz / self.scale_hz)
        return quantum

    def frequency_rounding_std(self, frequency_hz: FloatArray) -> FloatArray:
        """Return the standard uncertainty left by rounding: quantum / sqrt(12), uniform error.

        Parameters
        ----------
        frequency_hz : (N,) float ndarray
            As read, in hertz.

        Returns
        -------
        (N,) float ndarray
            In hertz; zeros where the frequencies are exact or nothing is known.
        """
        if self.exact:
            return np.zeros(frequency_hz.shape)
        std: FloatArray = self.quantum_hz(frequency_hz) / np.sqrt(12.0)
        return std

    def __str__(self) -> str:
        if self.printed.decimals is not None:
            places = self.printed.decimals
            return f"{places} decimal place{'' if places == 1 else 's'}"
        if self.printed.significant is not None:
            count = self.printed.significant
            return f"{count} digit{'' if count == 1 else 's'}"
        return "an unknown number of digits"


@dataclass(frozen=True)
class Precision:
    """What is known of the precision with which a text file prints its numbers.

    Parameters
    ----------
    form : {"real-imaginary", "magnitude-angle", "decibel-angle"}
        The two numbers printed for each complex sample; angles in degrees.
    first, second : Printed
        Precision of the first and of the second number.
    scale : float
        value = scale * printed value (unit prefix or normalisation resistance).
    radians : bool
        Whether angles were printed in radians instead of degrees.
    """

    form: Literal["real-imaginary", "magnitude-angle", "decibel-angle"]
    first: Printed
    second: Printed
    scale: float = 1.0
    radians: bool = False

    def rounding_std(self, values: ComplexArray) -> tuple[FloatArray, FloatArray, bool]:
        """Return the standard uncertainties left by rounding: quantum / sqrt(12), uniform error.

        Parameters
        ----------
        values : (N, K) complex ndarray
            The responses as read, scaled.

        Returns
        -------
        first, second : (N, K) float ndarray
            Standard uncertainty of the two orthogonal parts, in the unit of `values`.
        polar : bool
            False: the parts are real and imaginary. True: they lie along and across
            the phasor (radial, tangential).
        """
        printed = values / self.scale
        root = np.sqrt(12.0)
        if self.form == "real-imaginary":
            first = self.first.quantum(printed.real)
            second = self.second.quantum(printed.imag)
            return abs(self.scale) * first / root, abs(self.scale) * second / root, False
        size = np.abs(printed)
        angle = np.angle(printed, deg=not self.radians)
        across = self.second.quantum(angle)
        if not self.radians:
            across = np.deg2rad(across)
        if self.form == "decibel-angle":
            decibel = 20 * np.log10(np.where(size > 0, size, 1.0))
            along = size * self.first.quantum(decibel) * (np.log(10.0) / 20)
        else:
            along = self.first.quantum(size)
        return abs(self.scale) * along / root, np.abs(values) * across / root, True
