"""Poles that stand alone, each with a complex residue: for circuits under a periodic drive.

Linearised about its periodic state such a circuit answers, at the frequency of the probe or at
one sideband, with poles at the Floquet exponents and at every multiple of the drive frequency
beside them (N. M. Wereley, S. R. Hall, "Linear time periodic systems: transfer function, poles,
transmission zeroes and directional properties", Proc. American Control Conference, 1991, from
memory). The residues of a conversion term are not those of a real function, and those of the
images of one exponent have nothing to do with each other: no conjugates are implied.

The parameters are (−Re p, Im p): the left half-plane is the box −Re p > 0. Columns are real
multiples of 1/(s − p) and j/(s − p). Frequencies are normalised.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from polefit.engine.pole_set import ComplexArray, FloatArray


class ComplexPoles(NamedTuple):
    """Poles anywhere in the plane.

    Attributes
    ----------
    damping : (P,) float ndarray
        −Re p.
    omega : (P,) float ndarray
        Im p, of either sign.
    """

    damping: FloatArray
    omega: FloatArray

    @property
    def paired(self) -> bool:
        """No conjugates are implied."""
        return False

    @property
    def order(self) -> int:
        """Number of real parameters, 2P."""
        return 2 * self.omega.size

    @property
    def number(self) -> int:
        """Number of poles, P."""
        return self.omega.size

    @property
    def twofold(self) -> int:
        """Number of poles: each has two parameters."""
        return self.omega.size

    def vector(self) -> FloatArray:
        """Return (−Re p, Im p) as one vector."""
        return np.concatenate((self.damping, self.omega))

    def with_vector(self, vector: FloatArray) -> ComplexPoles:
        """Return as many poles with other parameters."""
        return ComplexPoles(vector[: self.number], vector[self.number :])

    def like(self, poles: ComplexArray) -> ComplexPoles:
        """Return the given poles."""
        return standing_alone(poles)

    def split(self) -> ComplexPoles:
        """Return the poles themselves: each stands alone already."""
        return self

    def poles(self) -> ComplexArray:
        """Return p."""
        return -self.damping + 1j * self.omega

    def own_poles(self) -> ComplexArray:
        """Return p."""
        return self.poles()

    def place(self, index: int) -> tuple[float, float]:
        """Return the frequency of a pole and the full width of its curve."""
        return float(self.omega[index]), 2 * abs(float(self.damping[index]))

    def sizes(self) -> FloatArray:
        """Return |p|."""
        return np.hypot(self.damping, self.omega)

    def half_widths(self) -> FloatArray:
        """Return |Re p|."""
        return np.abs(self.damping)

    def keep(self, mask: NDArray[np.bool_]) -> ComplexPoles:
        """Return the poles where `mask` is true."""
        return ComplexPoles(self.damping[mask], self.omega[mask])

    def join(self, other: ComplexPoles) -> ComplexPoles:
        """Return the poles of both."""
        return ComplexPoles(*(np.concatenate(pair) for pair in zip(self, other, strict=True)))

    def columns(self, index: int) -> list[int]:
        """Return the basis columns of one pole, which are also its places in the vector."""
        return [index, self.number + index]

    def direct_columns(self, terms: int) -> int:
        """Return how many real columns so many complex direct terms take."""
        return 2 * terms

    def direct_terms(self, coefficients: FloatArray) -> ComplexArray:
        """Return constant and s-proportional term of each channel, zero where left out."""
        terms = (coefficients.shape[1] - self.order) // 2
        found = np.zeros((len(coefficients), 2), dtype=np.complex128)
        found[:, :terms] = coefficients[:, self.order : self.order + terms]
        found[:, :terms] += 1j * coefficients[:, self.order + terms :]
        return found

    def evaluate(self, s: ComplexArray, direct: int) -> ComplexArray:
        """Evaluate the partial-fraction basis.

        Parameters
        ----------
        s : (N,) complex ndarray
            Normalised complex frequency.
        direct : int
            0: none, 1: constant, 2: constant and s.

        Returns
        -------
        (N, 2P + 2·direct) complex ndarray
            1/(s − p), j/(s − p), then 1 and s as asked for, then j and js.
        """
        p = self.number
        columns = np.empty((s.size, 2 * p + 2 * direct), dtype=np.complex128)
        np.divide(1.0, s[:, np.newaxis] - self.poles(), out=columns[:, :p])
        if direct:
            columns[:, 2 * p] = 1.0
        if direct > 1:
            columns[:, 2 * p + 1] = s
        columns[:, p : 2 * p] = 1j * columns[:, :p]
        columns[:, 2 * p + direct :] = 1j * columns[:, 2 * p : 2 * p + direct]
        return columns

    def evaluate_with_slopes(self, s: ComplexArray, direct: int) -> ComplexArray:
        """Evaluate the basis and, after it, 1/(s − p)² and j/(s − p)²."""
        p, basis = self.number, self.evaluate(s, direct)
        squares = basis[:, :p] ** 2
        return np.concatenate((basis, squares, 1j * squares), axis=1)

    def chain(self, coefficients: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Express the derivatives of the model by the parameters in the columns evaluated.

        Parameters
        ----------
        coefficients : (K, m) float ndarray
            Coefficients of the basis.

        Returns
        -------
        slopes : (K, order, order) float ndarray
            Of the derivative functions: with g = (x + jy)/(s − p), ∂g/∂(−Re p) =
            −(x + jy)/(s − p)² and ∂g/∂(Im p) = (jx − y)/(s − p)².
        basis : (K, m, order) float ndarray
            Of the basis: zero.
        """
        channels, m = coefficients.shape
        p, n = self.number, self.order
        x, y = coefficients[:, :p], coefficients[:, p:n]
        one, two = np.arange(p), np.arange(p, n)
        slopes = np.zeros((channels, n, n))
        slopes[:, one, one], slopes[:, two, one] = -x, -y
        slopes[:, one, two], slopes[:, two, two] = -y, x
        return slopes, np.zeros((channels, m, n))

    def residue_columns(self, s: ComplexArray, poles: ComplexArray) -> ComplexArray:
        """Return what the real, then the imaginary part of each residue adds at `s`."""
        return self.evaluate(s, 0)

    def residues(self, coefficients: FloatArray) -> ComplexArray:
        """Return the residues, (P, K)."""
        p = self.number
        result: ComplexArray = (coefficients[:, :p] + 1j * coefficients[:, p : 2 * p]).T
        return result

    def own_residues(self, coefficients: FloatArray) -> ComplexArray:
        """Return the residues, (P, K)."""
        return self.residues(coefficients)

    def pole_gradient(self, index: int) -> FloatArray:
        """Differentiate (Re p, Im p) by (−Re p, Im p)."""
        return np.array([[-1.0, 0.0], [0.0, 1.0]])

    def residue_gradient(self, coefficients: FloatArray, index: int) -> FloatArray:
        """Differentiate (Re, Im) of a residue by (coefficients, parameters), for K channels."""
        gradient = np.zeros((coefficients.shape[0], 2, 4))
        gradient[:, 0, 0] = gradient[:, 1, 1] = 1.0
        return gradient

    def companion(self, weights: FloatArray) -> ComplexArray:
        """Return the matrix whose eigenvalues are the zeros of Σ weights·basis + the last."""
        p = self.number
        drive = (weights[:p] + 1j * weights[p : 2 * p]) / weights[-1]
        matrix: ComplexArray = np.diag(self.poles()) - drive[np.newaxis, :]
        return matrix

    def half_plane(self) -> NDArray[np.bool_]:
        """Tell which parameters are positive in the left half-plane: −Re p."""
        return np.repeat([True, False], self.number)

    def reflected(self) -> ComplexPoles:
        """Return stable poles: each growing one at its mirror image."""
        return self._replace(damping=np.abs(self.damping))

    def on_axis(self, least: float) -> ComplexPoles:
        """Return stable poles: each growing one moved to the axis, `least` off it."""
        return self._replace(damping=np.maximum(self.damping, least))


NONE = ComplexPoles(np.zeros(0), np.zeros(0))
"""No poles, of this kind."""


def standing_alone(poles: ComplexArray) -> ComplexPoles:
    """Return poles, (P,) complex, each of which stands for itself."""
    return ComplexPoles(-poles.real, np.array(poles.imag))
