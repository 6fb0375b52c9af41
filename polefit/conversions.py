"""Between scattering, impedance and admittance matrices, with their uncertainty.

Every such conversion is one linear-fractional map of matrices,
M' = (a + b M) (c + d M)⁻¹ with diagonal a, b, c, d, whose differential is
dM' = (b − M' d) dM (c + d M)⁻¹. Voltages and currents are v = √R (A + B), i = (A − B)/√R in
terms of the waves A towards and B from a port of reference resistance R.
"""

from __future__ import annotations

from dataclasses import replace
from typing import get_args

import numpy as np

from polefit.errors import ArgumentError, DataError, NotSupportedError
from polefit.responses import Channel, ComplexArray, FloatArray, Quantity, ResponseSet

CONVERTIBLE: tuple[Quantity, ...] = ("scattering", "impedance", "admittance")
# A divisor this small beside its terms keeps fewer than four digits of a double.
_SMALLEST = 1e-12
_Diagonals = tuple[FloatArray, FloatArray, FloatArray, FloatArray]


def convert(
    responses: ResponseSet, quantity: Quantity, reference_ohm: float | None = None
) -> ResponseSet:
    """Convert a complete matrix of responses into another quantity.

    The modes of the result hold for other terminations than before, which its `termination`
    states: impedances hold for open ports, admittances for shorted ones.

    Parameters
    ----------
    responses : ResponseSet
        All n² responses between n ports, in any order.
    quantity : {"scattering", "impedance", "admittance"}
        What is wanted.
    reference_ohm : float, optional
        Reference resistance of all ports: that of the result if it is scattering, else that of
        scattering data which do not state theirs.

    Returns
    -------
    ResponseSet
        In the same order. `sample_std` carries on, to first order, what was known of the
        numbers' uncertainty; `reference_ohm` is kept for scattering only.

    Raises
    ------
    ArgumentError
        If the quantity cannot be had, or a reference resistance is missing or contradicts.
    DataError
        If responses are missing, or the matrix has no counterpart at some frequency.
    NotSupportedError
        If the responses are those of a pumped circuit.
    """
    if quantity == responses.quantity and reference_ohm is None:
        return responses
    _check_request(responses, quantity)
    order, ports = _matrix_order(responses, quantity)
    old, new = _references(responses, quantity, reference_ohm, ports)
    if quantity == responses.quantity and old == new:
        # Data that did not state their reference now do, and so does their termination.
        return replace(responses, reference_ohm=new, termination="")
    a, b, c, d = _diagonals(responses.quantity, quantity, old, new)
    shape = (responses.points, ports, ports)
    matrices = responses.values[:, order].reshape(shape)
    with np.errstate(all="ignore"):  # what is not finite is refused
        inverse = _inverse(c, d, matrices, responses, quantity)
        numerator = a[:, np.newaxis] * np.eye(ports) + b[:, np.newaxis] * matrices
        result = numerator @ inverse
        _refuse_not_finite(result, responses, quantity)
        std = _known_std(responses)
        if std is not None:
            left = b[:, np.newaxis] * np.eye(ports) - result * d
            variance = np.abs(left) ** 2 @ std[:, order].reshape(shape) ** 2 @ np.abs(inverse) ** 2
            _refuse_not_finite(variance, responses, quantity)
            std = _unordered(np.sqrt(variance), order)
    return replace(
        responses,
        values=_unordered(result, order),
        quantity=quantity,
        reference_ohm=new,
        termination=_termination(responses.quantity, quantity, old, new),
        precision=None,
        sample_std=std,
    )


def _check_request(responses: ResponseSet, quantity: str) -> None:
    if quantity not in CONVERTIBLE or responses.quantity not in CONVERTIBLE:
        known = get_args(Quantity)
        raise ArgumentError(
            f"quantity: {responses.quantity} data cannot be converted to {quantity!r}; "
            + (f"conversion is between {', '.join(CONVERTIBLE)}" if quantity in known else
               f"use one of {', '.join(CONVERTIBLE)}")
        )  # fmt: skip
    if responses.pump_hz is not None:
        raise NotSupportedError(
            f"{responses.quantity} data of a pumped circuit cannot be converted to {quantity}: "
            "the loads would change at one sideband only; simulate the wanted quantity"
        )


def _matrix_order(responses: ResponseSet, quantity: str) -> tuple[list[int], int]:
    """Columns that make the matrix row by row, and the number of ports."""
    ports = list(dict.fromkeys(c.output for c in responses.channels))
    ports += [c.input for c in responses.channels if c.input not in ports]
    ports = list(dict.fromkeys(ports))
    column = {channel: i for i, channel in enumerate(responses.channels)}
    wanted = [Channel(output, drive) for output in ports for drive in ports]
    missing = [str(channel) for channel in wanted if channel not in column]
    if missing:
        shown = ", ".join(missing[:3]) + (" …" if len(missing) > 3 else "")
        raise DataError(
            f"conversion of {responses.quantity} to {quantity} needs all {len(wanted)} responses "
            f"between {', '.join(ports[:6])}{' …' if len(ports) > 6 else ''}; missing: {shown}; "
            f"export the full matrix, or {quantity} itself"
        )
    return [column[channel] for channel in wanted], len(ports)


def _references(
    responses: ResponseSet, quantity: str, asked: float | None, ports: int
) -> tuple[tuple[float, ...] | None, tuple[float, ...] | None]:
    """Settle the reference resistances before and after, None where they have no meaning."""
    stated = responses.reference_ohm
    if stated is not None and len(stated) == 1:
        stated = stated * ports
    if responses.quantity != "scattering":
        stated = None
    elif stated is not None and len(stated) != ports:
        raise DataError(f"reference_ohm: {len(stated)} values for {ports} ports; give one for each")
    if asked is not None and not 0 < asked < np.inf:
        raise ArgumentError(f"reference_ohm: {asked!r} is not a positive resistance; give ohms")
    wanted = None if asked is None else (float(asked),) * ports
    if quantity == "scattering":
        new = wanted or stated
        if new is None:
            raise ArgumentError("reference_ohm: needed for scattering; say it, such as 50")
        return stated or new, new
    if responses.quantity != "scattering":
        if wanted is not None or quantity == responses.quantity:
            raise ArgumentError("reference_ohm: has no meaning without scattering; leave it out")
        return None, None
    if stated is not None and wanted is not None and stated != wanted:
        raise ArgumentError(f"reference_ohm: the data state {_listed(stated)}; leave it out")
    old = stated or wanted
    if old is None:
        raise ArgumentError("reference_ohm: the data do not state it; say it, such as 50")
    return old, None


def _diagonals(
    before: str, after: str, old: tuple[float, ...] | None, new: tuple[float, ...] | None
) -> _Diagonals:
    """Compose a, b, c, d: from `before` to (response, drive), then to `after`.

    Responses and drives are x = M y: waves B = S A, voltages v = Z i, currents i = Y v.
    """
    one = np.ones(len(old or new or (1.0,)))
    root_old = np.sqrt(np.array(old)) if old else one
    root_new = np.sqrt(np.array(new)) if new else one
    # (v, i) as sums of (x, y): coefficients of x and y.
    of_x = {
        "scattering": (root_old, -1 / root_old),
        "impedance": (one, 0 * one),
        "admittance": (0 * one, one),
    }[before]
    of_y = {
        "scattering": (root_old, 1 / root_old),
        "impedance": (0 * one, one),
        "admittance": (one, 0 * one),
    }[before]
    # New response and drive as sums of (v, i).
    response, drive = {
        "scattering": ((0.5 / root_new, -0.5 * root_new), (0.5 / root_new, 0.5 * root_new)),
        "impedance": ((one, 0 * one), (0 * one, one)),
        "admittance": ((0 * one, one), (one, 0 * one)),
    }[after]
    a = response[0] * of_y[0] + response[1] * of_y[1]
    b = response[0] * of_x[0] + response[1] * of_x[1]
    c = drive[0] * of_y[0] + drive[1] * of_y[1]
    d = drive[0] * of_x[0] + drive[1] * of_x[1]
    return a, b, c, d


def _refuse_not_finite(matrices: np.ndarray, responses: ResponseSet, quantity: str) -> None:
    bad = np.flatnonzero(~np.isfinite(matrices).all(axis=(1, 2)))
    if bad.size:
        raise DataError(
            f"the {responses.quantity} matrix at {responses.frequency_hz[bad[0]]:.9g} Hz is too "
            f"large to be converted to {quantity}; leave out that point, or use the "
            f"{responses.quantity} as it is"
        )


def _inverse(
    c: FloatArray, d: FloatArray, matrices: ComplexArray, responses: ResponseSet, quantity: str
) -> ComplexArray:
    """Invert c + d M, where that is more than the rounding of its two terms."""
    terms = d[:, np.newaxis] * matrices
    _refuse_not_finite(terms, responses, quantity)
    divisor = c[:, np.newaxis] * np.eye(c.size) + terms
    size = np.abs(c) + np.abs(terms).max(axis=-1)  # by rows, whose units may differ
    empty = np.any(size == 0, axis=-1)
    size[empty] = 1.0
    smallest = np.linalg.svd(divisor / size[..., np.newaxis], compute_uv=False)[:, -1]
    bad = np.flatnonzero(empty | ~(smallest > _SMALLEST))
    if bad.size:
        frequency = responses.frequency_hz[bad[0]]
        raise DataError(
            f"the {responses.quantity} matrix at {frequency:.9g} Hz has no {quantity} (singular); "
            f"leave out that point, or use the {responses.quantity} as it is"
        )
    return np.asarray(np.linalg.inv(divisor), dtype=np.complex128)


def _known_std(responses: ResponseSet) -> FloatArray | None:
    """Tell the standard uncertainty of each real and imaginary part, taken as circular."""
    if responses.sample_std is not None:
        return responses.sample_std
    if responses.precision is None:
        return None
    first, second, _ = responses.precision.rounding_std(responses.values)
    std: FloatArray = np.sqrt((first**2 + second**2) / 2)
    return std


def _unordered(matrices: np.ndarray, order: list[int]) -> np.ndarray:
    flat = np.empty((len(matrices), len(order)), dtype=matrices.dtype)
    flat[:, order] = matrices.reshape(len(matrices), len(order))
    flat.flags.writeable = False
    return flat


def _termination(
    before: str, after: str, old: tuple[float, ...] | None, new: tuple[float, ...] | None
) -> str:
    if after == "scattering":
        text = f"every port loaded with its reference resistance ({_listed(new)})"
        if before == "scattering":
            return f"{text}, in place of the {_listed(old)} of the data, by conversion"
        return f"{text}, added by conversion from {before}"
    state, done = {
        "impedance": ("every probed port open", "removed"),
        "admittance": ("every probed port shorted", "replaced by shorts"),
    }[after]
    if before == "scattering":
        return f"{state}: the {_listed(old)} reference loads were {done} by conversion"
    return f"{state}, by conversion from {before}"


def _listed(references: tuple[float, ...] | None) -> str:
    return ", ".join(f"{r:g}" for r in dict.fromkeys(references or ())) + " Ω"
