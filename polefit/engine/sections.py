"""Poles as first- and second-order sections with real coefficients.

A conjugate pair, or two real poles, is the section s² + c1·s + c0; a single real pole is s + c.
These parameters stay smooth where a pair meets on the real axis and splits, and the left half
plane is the box c1 > 0, c0 > 0, c > 0 (Routh-Hurwitz for degrees one and two).
Frequencies are normalised: s = jω / (scale of the problem).
"""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from polefit.engine.pole_set import ComplexArray, FloatArray


class Sections(NamedTuple):
    """Denominator sections.

    Attributes
    ----------
    c1, c0 : (P,) float ndarray
        Coefficients of the second-order sections.
    c : (R,) float ndarray
        Coefficients of the first-order sections.
    """

    c1: FloatArray
    c0: FloatArray
    c: FloatArray

    @property
    def paired(self) -> bool:
        """A pole implies its conjugate."""
        return True

    @property
    def order(self) -> int:
        """Number of poles, 2P + R."""
        return 2 * self.c1.size + self.c.size

    @property
    def number(self) -> int:
        """Number of sections, P + R."""
        return self.c1.size + self.c.size

    @property
    def twofold(self) -> int:
        """Number of second-order sections, P."""
        return self.c1.size

    def vector(self) -> FloatArray:
        """Return the parameters (c1, c0, c) as one vector of length `order`."""
        return np.concatenate((self.c1, self.c0, self.c))

    def with_vector(self, vector: FloatArray) -> Sections:
        """Return sections of the same kinds with other parameters."""
        p = self.c1.size
        return Sections(vector[:p], vector[p : 2 * p], vector[2 * p :])

    def like(self, poles: ComplexArray) -> Sections:
        """Return sections of the given poles; lower ones are implied."""
        return from_poles(poles)

    def weights(self) -> FloatArray:
        """Return the scale √|c0| of each second-order section."""
        scale: FloatArray = np.sqrt(np.abs(self.c0))
        return np.maximum(scale, 1e-150)

    def split(self) -> Sections:
        """Return the same poles with every second-order section of real poles split in two."""
        discriminant = self.c1**2 / 4 - self.c0
        real = discriminant >= 0
        if not real.any():
            return self
        # the larger root first, the other from the product: no cancellation
        half = self.c1[real] / 2
        large = half + np.where(half >= 0, 1.0, -1.0) * np.sqrt(discriminant[real])
        safe = np.where(large == 0, 1.0, large)
        small = np.where(large == 0, 0.0, self.c0[real] / safe)
        return Sections(self.c1[~real], self.c0[~real], np.concatenate((self.c, large, small)))

    def poles(self) -> ComplexArray:
        """Return all poles; upper members of pairs, then lower, then real poles."""
        flat = self.split()
        upper = -flat.c1 / 2 + 1j * np.sqrt(np.maximum(flat.c0 - flat.c1**2 / 4, 0.0))
        return np.concatenate((upper, upper.conj(), -flat.c.astype(np.complex128)))

    def own_poles(self) -> ComplexArray:
        """Return the upper or real pole of each of the split sections."""
        flat = self.split()
        return np.concatenate((flat.poles()[: flat.c1.size], (-flat.c).astype(np.complex128)))

    def place(self, index: int) -> tuple[float, float]:
        """Return the frequency of a section and the full width of its curve."""
        if index >= self.c1.size:
            return 0.0, 2 * abs(float(self.c[index - self.c1.size]))
        square = self.c0[index] - self.c1[index] ** 2 / 4
        return math.sqrt(max(square, 0.0)), abs(float(self.c1[index]))

    def sizes(self) -> FloatArray:
        """Return √|c0| or |c| of each section."""
        return np.concatenate((self.weights(), np.abs(self.c)))

    def half_widths(self) -> FloatArray:
        """Return half the width of each section's curve."""
        return np.concatenate((np.abs(self.c1) / 2, np.abs(self.c)))

    def drop(self, index: int) -> Sections:
        """Return the sections without number `index` (second-order ones count first)."""
        p = self.c1.size
        if index < p:
            return Sections(np.delete(self.c1, index), np.delete(self.c0, index), self.c)
        return Sections(self.c1, self.c0, np.delete(self.c, index - p))

    def keep(self, mask: NDArray[np.bool_]) -> Sections:
        """Return the sections where `mask`, of length `number`, is true."""
        p = self.c1.size
        return Sections(self.c1[mask[:p]], self.c0[mask[:p]], self.c[mask[p:]])

    def join(self, other: Sections) -> Sections:
        """Return the sections of both."""
        return Sections(*(np.concatenate(pair) for pair in zip(self, other, strict=True)))

    def columns(self, index: int) -> list[int]:
        """Return the basis columns of one section; see :func:`section_columns`."""
        return section_columns(self, index)

    def direct_columns(self, terms: int) -> int:
        """Return how many columns so many direct terms take: one each."""
        return terms

    def direct_terms(self, coefficients: FloatArray) -> FloatArray:
        """Return constant and s-proportional term of each channel, zero where left out."""
        found = np.zeros((len(coefficients), 2))
        found[:, : coefficients.shape[1] - self.order] = coefficients[:, self.order :]
        return found

    def evaluate(self, s: ComplexArray, direct: int) -> ComplexArray:
        """Return the basis; see :func:`evaluate`."""
        return evaluate(self, s, direct)

    def evaluate_with_slopes(self, s: ComplexArray, direct: int) -> ComplexArray:
        """Return basis and derivative functions; see :func:`evaluate_with_slopes`."""
        return evaluate_with_slopes(self, s, direct)

    def chain(self, coefficients: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return the coefficients of the derivatives; see :func:`chain`."""
        return chain(self, coefficients)

    def residue_columns(self, s: ComplexArray, poles: ComplexArray) -> ComplexArray:
        """Return what the real, then the imaginary part of each pair's residue adds at `s`.

        `poles` are the upper ones; a residue x + jy adds x·(2s − 2·Re p)/q − y·2·Im p/q.
        """
        count = self.c1.size
        columns = evaluate(self, s, 0)
        along, across = columns[:, :count], columns[:, count:] / self.weights()
        parts = (2 * along - 2 * poles.real * across, -2 * poles.imag * across)
        return np.concatenate(parts, axis=1)

    def residues(self, coefficients: FloatArray) -> ComplexArray:
        """Return the residues at :meth:`poles`; see :func:`residues`."""
        return residues(self, coefficients)

    def own_residues(self, coefficients: FloatArray) -> ComplexArray:
        """Return the residues at :meth:`own_poles`."""
        listed, p = residues(self, coefficients), self.c1.size
        return np.concatenate((listed[:p], listed[2 * p :]))

    def pole_gradient(self, index: int) -> FloatArray:
        """Differentiate (Re, Im) of a section's pole by its parameters."""
        if index >= self.c1.size:
            return np.array([[-1.0], [0.0]])
        omega = self.place(index)[0]
        return np.array([[-0.5, 0.0], [-self.c1[index] / (4 * omega), 1 / (2 * omega)]])

    def residue_gradient(self, coefficients: FloatArray, index: int) -> FloatArray:
        """Differentiate (Re, Im) of a residue by (coefficients, parameters), for K channels."""
        return residue_gradient(self, coefficients, index)

    def companion(self, weights: FloatArray) -> FloatArray:
        """Return the matrix whose eigenvalues are the zeros of Σ weights·basis + the last.

        Each second-order section is realised with the states (s/q, √|c0|/q), so that the zeros
        are the eigenvalues of A − b·cᵀ/d.
        """
        p, r, n = self.c1.size, self.c.size, self.order
        scale = self.weights()
        matrix = np.zeros((n, n))
        index = np.arange(p)
        matrix[index, index] = -self.c1
        matrix[index, p + index] = -self.c0 / scale
        matrix[p + index, index] = scale
        tail = 2 * p + np.arange(r)
        matrix[tail, tail] = -self.c
        drive = np.concatenate((np.ones(p), np.zeros(p), np.ones(r)))
        matrix -= np.outer(drive, weights[:-1] / weights[-1])
        return matrix

    def half_plane(self) -> NDArray[np.bool_]:
        """All coefficients are positive where all poles lie in the left half-plane."""
        return np.ones(self.order, dtype=bool)

    def reflected(self) -> Sections:
        """Return the sections with every coefficient made positive."""
        return self.with_vector(np.abs(self.vector()))

    def on_axis(self, least: float) -> Sections:
        """Return the sections with right-half-plane poles moved to the axis."""
        return Sections(
            np.maximum(self.c1, 1e-9 * np.sqrt(np.abs(self.c0))),
            np.maximum(np.abs(self.c0), least),
            np.maximum(self.c, least),
        )


NONE = Sections(np.zeros(0), np.zeros(0), np.zeros(0))
"""No poles, of this kind."""


def from_poles(poles: ComplexArray) -> Sections:
    """Build sections from upper-half-plane and real poles; lower ones are implied.

    Parameters
    ----------
    poles : (n,) complex ndarray
        Poles with Im < 0 are ignored: they are taken as conjugates of listed ones.
    """
    upper = poles[poles.imag > 0]
    real = poles[poles.imag == 0].real
    return Sections(-2 * upper.real, np.abs(upper) ** 2, -real)


def evaluate(sections: Sections, s: ComplexArray, direct: int) -> ComplexArray:
    """Evaluate the partial-fraction basis.

    Parameters
    ----------
    sections : Sections
        P second-order and R first-order sections.
    s : (N,) complex ndarray
        Normalised complex frequency.
    direct : int
        0: none, 1: constant, 2: constant and s.

    Returns
    -------
    (N, 2P + R + direct) complex ndarray
        s/q, √|c0|/q with q = s² + c1·s + c0, 1/(s + c), then 1 and s as asked for.
    """
    p, r = sections.c1.size, sections.c.size
    columns = np.empty((s.size, 2 * p + r + direct), dtype=np.complex128)
    fill = _fill if s.real.any() else _fill_on_axis
    fill(sections, s, columns[:, : 2 * p + r])
    if direct:
        columns[:, 2 * p + r] = 1.0
    if direct > 1:
        columns[:, 2 * p + r + 1] = s
    return columns


def _fill(sections: Sections, s: ComplexArray, columns: ComplexArray) -> None:
    p, column = sections.c1.size, s[:, np.newaxis]
    inverse = 1.0 / ((column + sections.c1) * column + sections.c0)
    np.multiply(column, inverse, out=columns[:, :p])
    np.multiply(sections.weights(), inverse, out=columns[:, p : 2 * p])
    np.divide(1.0, column + sections.c, out=columns[:, 2 * p :])


def _fill_on_axis(sections: Sections, s: ComplexArray, columns: ComplexArray) -> None:
    """For s = jω: real arithmetic, several times faster than complex division."""
    p, omega, weights = sections.c1.size, s.imag[:, np.newaxis], sections.weights()
    real, imag = columns.real, columns.imag
    a, b = sections.c0 - omega**2, omega * sections.c1
    size = a**2 + b**2
    a /= size
    b /= size
    np.multiply(omega, b, out=real[:, :p])
    np.multiply(omega, a, out=imag[:, :p])
    np.multiply(weights, a, out=real[:, p : 2 * p])
    np.multiply(-weights, b, out=imag[:, p : 2 * p])
    size = omega**2 + sections.c**2
    np.divide(sections.c, size, out=real[:, 2 * p :])
    np.divide(-omega, size, out=imag[:, 2 * p :])


def evaluate_with_slopes(sections: Sections, s: ComplexArray, direct: int) -> ComplexArray:
    """Evaluate the basis and, after it, the functions that span its derivatives by the poles.

    Returns
    -------
    (N, 2P + R + direct + order) complex ndarray
        The basis; then s·√|c0|/q², |c0|/q² and 1/(s + c)². See :func:`chain`.
    """
    p, r = sections.c1.size, sections.c.size
    basis = evaluate(sections, s, direct)
    m = basis.shape[1]
    columns = np.empty((s.size, m + sections.order), dtype=np.complex128)
    columns[:, :m] = basis
    across = basis[:, p : 2 * p]
    np.multiply(basis[:, :p], across, out=columns[:, m : m + p])
    np.multiply(across, across, out=columns[:, m + p : m + 2 * p])
    np.square(basis[:, 2 * p : 2 * p + r], out=columns[:, m + 2 * p :])
    return columns


def chain(sections: Sections, coefficients: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Express the derivatives of the model by the pole parameters in the columns evaluated.

    Parameters
    ----------
    sections : Sections
        The poles.
    coefficients : (K, m) float ndarray
        Coefficients of the basis; products with √|c0| are what is held.

    Returns
    -------
    slopes : (K, order, order) float ndarray
        Coefficients of the derivative functions: with g = (a·s + b√|c0|)/q the response of a
        section, ∂g/∂c1 = −s·g/q and ∂g/∂c0 = −g/q.
    basis : (K, m, order) float ndarray
        Coefficients of the basis itself, which enters since s²/q² = 1/q − (c1·s + c0)/q².
    """
    channels, m = coefficients.shape
    p, n = sections.c1.size, sections.order
    weight = sections.weights()
    a, b = coefficients[:, :p], coefficients[:, p : 2 * p]
    one, two, tail = np.arange(p), np.arange(p, 2 * p), np.arange(2 * p, n)
    slopes, basis = np.zeros((channels, n, n)), np.zeros((channels, m, n))
    slopes[:, one, one] = a * sections.c1 / weight - b
    slopes[:, two, one] = a * sections.c0 / weight**2
    basis[:, two, one] = -a / weight
    slopes[:, one, two] = -a / weight
    slopes[:, two, two] = -b / weight
    slopes[:, tail, tail] = -coefficients[:, 2 * p : n]
    return slopes, basis


def section_columns(sections: Sections, index: int) -> list[int]:
    """Return the basis columns of one section, which are also its places among the parameters."""
    p = sections.c1.size
    return [index, p + index] if index < p else [p + index]


def residues(sections: Sections, coefficients: FloatArray) -> ComplexArray:
    """Return the residues at the poles of :meth:`Sections.poles`, for sections without real pairs.

    Parameters
    ----------
    sections : Sections
        All second-order sections must hold conjugate pairs (see :meth:`Sections.split`).
    coefficients : (K, m) float ndarray
        Coefficients of the basis columns, for each channel.

    Returns
    -------
    (order, K) complex ndarray
    """
    p, r = sections.c1.size, sections.c.size
    omega = np.sqrt(sections.c0 - sections.c1**2 / 4)
    upper = -sections.c1 / 2 + 1j * omega
    along, across = coefficients[:, :p], coefficients[:, p : 2 * p] * sections.weights()
    pair = (along * upper + across) / (2j * omega)
    real = coefficients[:, 2 * p : 2 * p + r].astype(np.complex128)
    return np.concatenate((pair, pair.conj(), real), axis=1).T


def residue_gradient(sections: Sections, coefficients: FloatArray, index: int) -> FloatArray:
    """Differentiate (Re, Im) of a residue by (coefficients, pole parameters), for K channels."""
    channels = coefficients.shape[0]
    if index >= sections.c1.size:
        gradient = np.zeros((channels, 2, 2))
        gradient[:, 0, 0] = 1.0
        return gradient
    c1, c0 = sections.c1[index], sections.c0[index]
    omega = math.sqrt(c0 - c1**2 / 4)
    pole = complex(-c1 / 2, omega)
    scale = math.sqrt(abs(c0))
    a, b = coefficients[:, 0], coefficients[:, 1]
    top = a * pole + b * scale
    omega_c1, omega_c0 = -c1 / (4 * omega), 1 / (2 * omega)
    pole_c1, pole_c0 = complex(-0.5, omega_c1), complex(0.0, omega_c0)
    below = 2j * omega
    slopes = np.stack(
        (
            np.full(channels, pole / below),
            np.full(channels, scale / below),
            a * pole_c1 / below - top / below * omega_c1 / omega,
            # √c0 in the second basis column varies with c0, but b·√c0 is what the data fix
            a * pole_c0 / below - top / below * omega_c0 / omega,
        ),
        axis=1,
    )
    return np.stack((slopes.real, slopes.imag), axis=1)
