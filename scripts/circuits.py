"""Exact nodal analysis of small linear circuits, for the example and for tests.

Elements are written as SPICE cards: ``R`` ``L`` ``C``, mutual coupling ``K``, voltage-controlled
current source ``G`` and voltage source ``E``. Node ``0`` is ground.

    >>> tank = Circuit.from_cards("L1 a 0 1u", "C1 a 0 100p", "R1 a 0 2k")
    >>> [f"{p.imag:.6g}" for p in tank.poles() if p.imag > 0]
    ['9.99687e+07']
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any, TypeAlias

import numpy as np
import scipy.linalg
from numpy.typing import ArrayLike, NDArray

FloatArray: TypeAlias = NDArray[np.float64]
ComplexArray: TypeAlias = NDArray[np.complex128]

_NUMBER = re.compile(r"([+-]?[0-9.]+(?:e[+-]?[0-9]+)?)(meg|[tgkmunpf])?[a-z]*$")
_PREFIX = {"t": 12, "g": 9, "meg": 6, "k": 3, "m": -3, "u": -6, "n": -9, "p": -12, "f": -15}
_INFINITE = 1e-10
"""An eigenvalue alpha/beta with |beta| below this share of |alpha| is one at infinity."""


def number(text: str) -> float:
    """Read a SPICE number: ``2.2k`` is 2200, ``3meg`` is 3e6, ``100f`` is exactly 1e-13."""
    match = _NUMBER.match(text.lower())
    if match is None:
        raise ValueError(f"{text!r} is not a number")
    digits, prefix = match.groups()
    if prefix is None:
        return float(digits)
    mantissa, _, exponent = digits.partition("e")
    return float(f"{mantissa}e{int(exponent or 0) + _PREFIX[prefix]}")


@dataclass(frozen=True, eq=False)
class Circuit:
    """A linear circuit (G + s C) x = b, x holding node voltages, then branch currents.

    Parameters
    ----------
    conductance, susceptance : (n, n) float ndarray
        G and C.
    nodes : tuple of str
        Names of the nodes; node i is entry i of x.
    """

    conductance: FloatArray
    susceptance: FloatArray
    nodes: tuple[str, ...]

    @classmethod
    def from_cards(cls, *cards: str) -> Circuit:
        """Build the matrices from cards, one element each.

        Blank cards, comments (``*``), commands (``.``) and current sources (``I``) are skipped.

        Raises
        ------
        ValueError
            If a card is not understood.
        """
        parts = [card.split() for card in cards if card.strip() and card.strip()[0] not in "*.Ii"]
        nodes = _node_names(parts)
        branches = [p[0].lower() for p in parts if p[0][0].lower() in "le"]
        size = len(nodes) + len(branches)
        index = {name: i for i, name in enumerate(nodes)} | {"0": size}
        index |= {f"#{name}": len(nodes) + i for i, name in enumerate(branches)}
        G, C = np.zeros((size + 1, size + 1)), np.zeros((size + 1, size + 1))
        coils = {p[0].lower(): number(p[3]) for p in parts if p[0][0].lower() == "l"}
        for part in parts:
            _stamp(part, index, coils, G, C)
        return cls(G[:size, :size], C[:size, :size], nodes)

    @classmethod
    def from_netlist(cls, text: str) -> Circuit:
        """Build from a netlist: its first line is a title, ``.end`` ends it."""
        lines = text.splitlines()[1:]
        ends = [i for i, line in enumerate(lines) if line.strip().lower() == ".end"]
        return cls.from_cards(*lines[: ends[0] if ends else None])

    def impedances(self, frequency_hz: ArrayLike, pairs: Iterable[tuple[str, str]]) -> ComplexArray:
        """Transfer impedances v(output) / i(input), in ohm.

        Parameters
        ----------
        frequency_hz : (N,) array_like of float
            Hertz.
        pairs : iterable of (str, str)
            K pairs (output, input); equal names give driving-point impedances.

        Returns
        -------
        (N, K) complex ndarray
        """
        listed = list(pairs)
        drives = list(dict.fromkeys(drive for _, drive in listed))
        rows = [self.nodes.index(output) for output, _ in listed]
        columns = [drives.index(drive) for _, drive in listed]
        source = np.zeros((len(self.conductance), len(drives)))
        source[[self.nodes.index(d) for d in drives], range(len(drives))] = 1.0
        s = 2j * np.pi * np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64))
        row, column = self._balance(float(np.median(np.abs(s))))
        out = np.empty((s.size, len(listed)), dtype=np.complex128)
        for k, point in enumerate(s):
            matrix = row[:, None] * (self.conductance + point * self.susceptance) * column
            x = column[:, None] * np.linalg.solve(matrix, row[:, None] * source)
            out[k] = x[rows, columns]
        return out

    def driving_points(self, frequency_hz: ArrayLike, nodes: Sequence[str]) -> ComplexArray:
        """Driving-point impedances at `nodes`, (N, K), in ohm."""
        return self.impedances(frequency_hz, [(n, n) for n in nodes])

    def poles(self, *, polish: bool = True) -> ComplexArray:
        """Natural frequencies in rad/s: finite s with det(G + s C) = 0, slowest first.

        Parameters
        ----------
        polish : bool
            Whether to refine each; several times quicker without.

        Notes
        -----
        Generalised eigenvalues of (-G, C), rows and columns equilibrated, each polished by
        the two-sided Rayleigh quotient s = -(yᵀ G x)/(yᵀ C x), so that slow poles beside
        fast ones keep their digits.
        """
        scale = self._typical_rate()
        for _ in range(2):
            row, column = self._balance(scale)
            G = row[:, None] * self.conductance * column
            C = row[:, None] * (scale * self.susceptance) * column
            pairs = scipy.linalg.eig(-G, C, right=False, homogeneous_eigvals=True)
            alpha, beta = np.asarray(pairs[0]), np.asarray(pairs[1])
            finite = np.abs(beta) > _INFINITE * np.abs(alpha)
            found = scale * alpha[finite] / beta[finite]
            if np.any(found != 0):
                scale = float(np.exp(np.mean(np.log(np.abs(found[found != 0])))))
        upper = [p for p in found if p.imag >= 0]
        polished = np.array([self._polish(p) for p in upper] if polish else upper)
        paired = np.concatenate([polished, polished[polished.imag > 0].conj()])
        return paired[np.lexsort((paired.imag, np.abs(paired)))]

    def residues(self, pole: complex, pairs: Iterable[tuple[str, str]]) -> ComplexArray:
        """Residues of the impedances at a simple pole, in ohm·rad/s.

        Near the pole (G + s C)⁻¹ = x yᵀ / ((s - p) yᵀ C x), x and y its null vectors.
        """
        x, y = self._null_vectors(pole)
        weight = y @ self.susceptance @ x
        index = self.nodes.index
        return np.array([x[index(out)] * y[index(drive)] / weight for out, drive in pairs])

    def _typical_rate(self) -> float:
        """Geometric mean of max|G| / max|C| over the rows: 1/√(LC) for a tank, 1/(RC) for an RC."""
        rows = np.abs(self.conductance).max(axis=1), np.abs(self.susceptance).max(axis=1)
        both = (rows[0] > 0) & (rows[1] > 0)
        return float(np.exp(np.mean(np.log(rows[0][both] / rows[1][both])))) if both.any() else 1.0

    def _balance(self, scale: float) -> tuple[FloatArray, FloatArray]:
        size = np.abs(self.conductance) + scale * np.abs(self.susceptance)
        row, column = np.ones(len(size)), np.ones(len(size))
        for _ in range(6):
            row = 1.0 / (size * column).max(axis=1)
            column = 1.0 / (row[:, None] * size).max(axis=0)
        return row, column

    def _null_vectors(self, pole: complex) -> tuple[ComplexArray, ComplexArray]:
        row, column = self._balance(abs(pole) or 1.0)
        matrix = row[:, None] * (self.conductance + pole * self.susceptance) * column
        u, _, vh = np.linalg.svd(matrix)
        return column * vh[-1].conj(), row * u[:, -1].conj()

    def _polish(self, pole: complex) -> complex:
        refined = complex(pole)
        for _ in range(3):
            x, y = self._null_vectors(refined)
            refined = complex(-(y @ self.conductance @ x) / (y @ self.susceptance @ x))
        if pole.imag == 0 or abs(refined.imag) < 1e-14 * abs(refined):
            return complex(refined.real)
        return refined


def _node_names(parts: list[list[str]]) -> tuple[str, ...]:
    seen: dict[str, None] = {}
    for part in parts:
        count = {"g": 4, "e": 4, "k": 0}.get(part[0][0].lower(), 2)
        seen.update(dict.fromkeys(part[1 : 1 + count]))
    seen.pop("0", None)
    return tuple(seen)


def _stamp(part: list[str], index: dict[str, int], coils: dict[str, float], G: Any, C: Any) -> None:
    kind = part[0][0].lower()
    if kind in "rc" and len(part) == 4:
        matrix, value = (G, 1.0 / number(part[3])) if kind == "r" else (C, number(part[3]))
        a, b = index[part[1]], index[part[2]]
        matrix[[a, b, a, b], [a, b, b, a]] += np.array([value, value, -value, -value])
    elif kind == "g" and len(part) == 6:
        a, b, p, m = (index[n] for n in part[1:5])
        value = number(part[5])
        for at, to, sign in ((a, p, 1), (a, m, -1), (b, p, -1), (b, m, 1)):
            G[at, to] += sign * value
    elif kind == "k" and len(part) == 4:
        first, second = part[1].lower(), part[2].lower()
        mutual = number(part[3]) * np.sqrt(coils[first] * coils[second])
        i, j = index[f"#{first}"], index[f"#{second}"]
        C[i, j] -= mutual
        C[j, i] -= mutual
    elif (kind == "l" and len(part) == 4) or (kind == "e" and len(part) == 6):
        _stamp_branch(part, index, G, C)
    else:
        raise ValueError(f"card not understood: {' '.join(part)}")


def _stamp_branch(part: list[str], index: dict[str, int], G: Any, C: Any) -> None:
    """Stamp an inductor or a voltage source: its current is an unknown of its own."""
    branch = index[f"#{part[0].lower()}"]
    a, b = index[part[1]], index[part[2]]
    for node, sign in ((a, 1.0), (b, -1.0)):
        G[node, branch] += sign
        G[branch, node] += sign
    if part[0][0].lower() == "l":
        C[branch, branch] -= number(part[3])
        return
    gain = number(part[5])
    G[branch, index[part[3]]] -= gain
    G[branch, index[part[4]]] += gain
