"""What the engine asks of a set of poles, whichever way they are parametrised.

Two kinds exist: sections with real coefficients, where a pair counts as one
(:mod:`polefit.engine.sections`), and poles that stand alone with complex residues
(:mod:`polefit.engine.complex_poles`), for circuits under a periodic drive.
"""

from __future__ import annotations

from typing import Protocol, Self

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


class PoleSet(Protocol):
    """Members ("sections") with one or two real parameters and as many real basis columns.

    Those with two come first, member i of them holding parameters and columns i and
    `twofold` + i.
    """

    @property
    def paired(self) -> bool:
        """Whether a pole implies its conjugate."""

    @property
    def order(self) -> int:
        """Number of real parameters, which is also that of the basis columns."""

    @property
    def number(self) -> int:
        """Number of members."""

    @property
    def twofold(self) -> int:
        """Number of members with two parameters."""

    def vector(self) -> FloatArray:
        """Return all parameters."""

    def with_vector(self, vector: FloatArray) -> Self:
        """Return poles of the same kinds with other parameters."""

    def like(self, poles: ComplexArray) -> Self:
        """Return a set of this kind with the given poles."""

    def split(self) -> Self:
        """Return the same poles with every member that can be judged by itself on its own."""

    def poles(self) -> ComplexArray:
        """Return all poles, conjugates included where they are implied."""

    def own_poles(self) -> ComplexArray:
        """Return one pole for each member of a set that is split."""

    def place(self, index: int) -> tuple[float, float]:
        """Return the frequency of a member and the full width of its curve."""

    def sizes(self) -> FloatArray:
        """Return the distance of each member from the origin."""

    def half_widths(self) -> FloatArray:
        """Return half the width of the curve of each member."""

    def keep(self, mask: NDArray[np.bool_]) -> Self:
        """Return the members where `mask` is true."""

    def join(self, other: Self) -> Self:
        """Return the members of both."""

    def columns(self, index: int) -> list[int]:
        """Return the basis columns of one member, which are also its places in the vector."""

    def direct_columns(self, terms: int) -> int:
        """Return how many real columns so many direct terms take."""

    def direct_terms(self, coefficients: FloatArray) -> FloatArray | ComplexArray:
        """Return constant and s-proportional term of each channel, zero where left out."""

    def evaluate(self, s: ComplexArray, direct: int) -> ComplexArray:
        """Return the basis at `s`, direct terms last."""

    def evaluate_with_slopes(self, s: ComplexArray, direct: int) -> ComplexArray:
        """Return the basis and, after it, the functions that span its derivatives."""

    def chain(self, coefficients: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Express the model's derivatives by the parameters in these functions and the basis."""

    def residue_columns(self, s: ComplexArray, poles: ComplexArray) -> ComplexArray:
        """Return what the real, then the imaginary part of each member's residue adds at `s`.

        `poles` are its own, as they were given to :meth:`like`.
        """

    def residues(self, coefficients: FloatArray) -> ComplexArray:
        """Return the residues at :meth:`poles`, a column for each channel."""

    def own_residues(self, coefficients: FloatArray) -> ComplexArray:
        """Return the residues at :meth:`own_poles`."""

    def pole_gradient(self, index: int) -> FloatArray:
        """Differentiate (Re, Im) of a member's pole by its parameters."""

    def residue_gradient(self, coefficients: FloatArray, index: int) -> FloatArray:
        """Differentiate (Re, Im) of a residue by coefficients and parameters of its member."""

    def companion(self, weights: FloatArray) -> NDArray[np.inexact]:
        """Return the matrix whose eigenvalues are the zeros of Σ weights·basis + the last."""

    def half_plane(self) -> NDArray[np.bool_]:
        """Tell which parameters are positive where all poles lie in the left half-plane."""

    def reflected(self) -> Self:
        """Return stable poles: each growing one at its mirror image."""

    def on_axis(self, least: float) -> Self:
        """Return stable poles: each growing one moved to the axis, `least` off it."""
