"""Cramér-Rao bounds of poles in responses whose exact poles, residues and noise are known.

F = JᵀWJ over the real and imaginary parts of all samples, W the inverse variances (S. Kay,
"Fundamentals of Statistical Signal Processing: Estimation Theory", 1993, Gaussian noise of known
covariance; from memory). The linear parameters are private to a channel and are projected out
there by QR, which leaves the information of the poles with everything else marginalised.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

BURIED = 10.0
"""χ² that a pole must add to be a parameter: no criterion would pay for four unknowns otherwise."""
RANK = 1e-11
"""Singular values below this share of the largest are rounding."""


@dataclass(frozen=True, eq=False)
class Known:
    """A response that is known exactly: Σ r/(s − p) with conjugates, times a common factor.

    Parameters
    ----------
    frequency_hz : (N,) float ndarray
        Hertz.
    values : (N, K) complex ndarray
        Exact responses, `factor` included.
    poles : (n,) complex ndarray
        Poles with Im ≥ 0, rad/s; those with Im > 0 stand for their conjugates too.
    residues : (n, K) complex ndarray
        Residues at these poles, before `factor`.
    factor : (N,) complex ndarray, optional
        Factor without poles, such as exp(−sτ); its delay then is an unknown too.
    complex_coefficients : bool
        Poles stand for themselves alone, as in periodically driven circuits.
    """

    frequency_hz: FloatArray
    values: ComplexArray
    poles: ComplexArray
    residues: ComplexArray
    factor: ComplexArray | None = None
    complex_coefficients: bool = False


@dataclass(frozen=True, eq=False)
class Spread:
    """Standard deviations of the parts of each sample.

    Parameters
    ----------
    first, second : (N, K) float ndarray
        Of real and imaginary part, or along and across the phasor.
    polar : bool
        Which of the two.
    """

    first: FloatArray
    second: FloatArray
    polar: bool = False

    def scaled(self, by: float) -> Spread:
        """Return the same noise, `by` times as strong."""
        return Spread(self.first * by, self.second * by, self.polar)


@dataclass(frozen=True, eq=False)
class Bounds:
    """Smallest standard deviations that an unbiased estimator can have.

    Parameters
    ----------
    growth, angular : (n,) float ndarray
        Of Re p and Im p, rad/s; infinite where the data do not hold the pole.
    energy : (n,) float ndarray
        χ² by which leaving the pole out, and refitting residues, would show.
    """

    growth: FloatArray
    angular: FloatArray
    energy: FloatArray


def bounds(known: Known, spread: Spread, direct: int = 2) -> Bounds:
    """Bound the poles, with residues, direct terms and all other poles unknown.

    Parameters
    ----------
    known : Known
        The exact responses.
    spread : Spread
        The exact noise.
    direct : int
        Direct terms for each channel: 0, 1 (constant) or 2 (constant and s).

    Returns
    -------
    Bounds

    Notes
    -----
    Marginalising over poles that do not show makes no sense: linearised, they could stand
    anywhere. Poles are therefore taken in order of their distance from the sampled band, and one
    becomes an unknown only if what it adds to the response, after the residues of those already
    taken and the direct terms are refitted, has a χ² of at least `BURIED` over all
    samples. The others are held at zero: bound infinite. Columns are scaled to unit length, and
    directions of the nuisance space below `RANK` are dropped, which errs on the small side.
    """
    scale = 2 * np.pi * float(known.frequency_hz[-1])
    s: ComplexArray = np.asarray(2j * np.pi * known.frequency_hz / scale, dtype=np.complex128)
    poles, residues = known.poles / scale, known.residues / scale
    linear = [_linear_columns(s, p, known.complex_coefficients) for p in poles]
    rows = _Rows(known, spread, s)
    constant = [s**k for k in range(direct)]
    if known.complex_coefficients:
        constant = [f * c for c in constant for f in (1.0, 1j)]
    taken, energy = _taken(rows, poles, residues, linear, constant, float(s[0].imag))
    growth, angular = np.full(poles.size, np.inf), np.full(poles.size, np.inf)
    information, places = _information(
        rows, known, poles, residues, [linear[i] for i in taken], constant, taken, s
    )
    size = np.sqrt(np.diag(information))
    size[size == 0] = 1.0
    covariance = np.linalg.pinv(information / np.outer(size, size), rcond=1e-14, hermitian=True)
    std = scale * np.sqrt(np.maximum(np.diag(covariance), 0.0)) / size
    for i, (along, across) in places.items():
        growth[i] = std[along]
        angular[i] = std[across] if across is not None else 0.0
    return Bounds(growth, angular, energy)


@dataclass(frozen=True, eq=False)
class _Rows:
    """Turns complex columns into weighted real rows of one channel."""

    known: Known
    spread: Spread
    s: ComplexArray

    def of(self, columns: list[ComplexArray], channel: int) -> FloatArray:
        table = np.stack(columns, axis=1).astype(np.complex128)
        if self.known.factor is not None:
            table = table * self.known.factor[:, None]
        if self.spread.polar:
            values = self.known.values[:, channel]
            size = np.abs(values)
            table = (
                table * np.where(size > 0, values.conj() / np.where(size > 0, size, 1), 1)[:, None]
            )
        return np.concatenate(
            [
                table.real / self.spread.first[:, channel, None],
                table.imag / self.spread.second[:, channel, None],
            ]
        )


def _linear_columns(s: ComplexArray, pole: complex, alone: bool) -> list[ComplexArray]:
    upper = 1 / (s - pole)
    if alone:
        return [upper, 1j * upper]
    if pole.imag == 0:
        return [upper]
    lower = 1 / (s - np.conj(pole))
    return [upper + lower, 1j * (upper - lower)]


def _pole_columns(s: ComplexArray, pole: complex, r: complex, alone: bool) -> list[ComplexArray]:
    upper = r / (s - pole) ** 2
    if alone:
        return [upper, 1j * upper]
    if pole.imag == 0:
        return [upper.real.astype(np.complex128) + 1j * upper.imag]
    lower = np.conj(r) / (s - np.conj(pole)) ** 2
    return [upper + lower, 1j * (upper - lower)]


def _project(rows: FloatArray, base: FloatArray) -> FloatArray:
    """Return the rows orthogonal to the columns of `base`, an orthonormal set."""
    once = rows - base @ (base.T @ rows)
    return np.asarray(once - base @ (base.T @ once))


def _orthonormal(columns: FloatArray) -> FloatArray:
    size = np.linalg.norm(columns, axis=0)
    used = columns[:, size > 0] / size[size > 0]
    if used.shape[1] == 0:
        return np.zeros((columns.shape[0], 0))
    u, values, _ = np.linalg.svd(used, full_matrices=False)
    return np.asarray(u[:, values > RANK * values[0]])


def _taken(
    rows: _Rows,
    poles: ComplexArray,
    residues: ComplexArray,
    linear: list[list[ComplexArray]],
    constant: list[ComplexArray],
    low: float,
) -> tuple[list[int], FloatArray]:
    """Return the poles that are parameters, nearest to the band first, and all energies."""
    at = np.where(poles.imag == 0, np.abs(poles), poles.imag)
    outside = np.maximum(np.maximum(low - at, at - 1.0), 0.0)
    order = np.lexsort((-np.abs(residues).max(axis=1), outside + 1e-9 * np.abs(poles.real)))
    channels = residues.shape[1]
    points = 2 * rows.s.size
    bases = [
        _orthonormal(rows.of(constant, k)) if constant else np.zeros((points, 0))
        for k in range(channels)
    ]
    taken: list[int] = []
    energy = np.zeros(poles.size)
    for i in order:
        columns = [rows.of(linear[i], k) for k in range(channels)]
        for k in range(channels):
            r = residues[i, k]
            own = columns[k] @ (np.array([r.real, r.imag])[: columns[k].shape[1]])
            energy[i] += float(np.sum(_project(own[:, None], bases[k]) ** 2))
        if energy[i] >= BURIED:
            taken.append(int(i))
            for k in range(channels):
                bases[k] = np.hstack((bases[k], _orthonormal(_project(columns[k], bases[k]))))
    return taken, energy


def _information(
    rows: _Rows,
    known: Known,
    poles: ComplexArray,
    residues: ComplexArray,
    linear: list[list[ComplexArray]],
    constant: list[ComplexArray],
    taken: list[int],
    s: ComplexArray,
) -> tuple[FloatArray, dict[int, tuple[int, int | None]]]:
    """Return the information of the pole parameters, and where each pole's are."""
    alone = known.complex_coefficients
    places: dict[int, tuple[int, int | None]] = {}
    count = 0
    for i in taken:
        single = poles[i].imag == 0 and not alone
        places[i] = (count, None if single else count + 1)
        count += 1 if single else 2
    delay = known.factor is not None
    total = np.zeros((count + delay, count + delay))
    for k in range(residues.shape[1]):
        slopes = [c for i in taken for c in _pole_columns(s, poles[i], residues[i, k], alone)]
        if delay:
            assert known.factor is not None
            slopes.append(-s * known.values[:, k] / known.factor)
        if not slopes:
            continue
        nuisance = [c for one in linear for c in one] + constant
        base = _orthonormal(rows.of(nuisance, k)) if nuisance else np.zeros((2 * s.size, 0))
        left = _project(rows.of(slopes, k), base)
        total += left.T @ left
    return total, places
