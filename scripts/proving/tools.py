"""Those who are asked: polefit, and two naive users of general-purpose methods."""

from __future__ import annotations

import time
import warnings
from collections.abc import Callable

import numpy as np
from scipy.interpolate import AAA

import polefit
from polefit.engine.blocks import make_block
from polefit.engine.vector_fitting import relocate, starting_sections
from polefit.modes import Mode
from proving.case import Case, place
from proving.cramer_rao import ComplexArray
from proving.scoring import Answer, Claim

AAA_TERMS = 60
FIXED_ORDER = 16
SWEEPS = 12
NEGLIGIBLE = 1e-3
"""A pole whose peak is below this share of the largest response is overlooked by naive users."""


def ask_polefit(case: Case) -> Answer:
    """Identify, timed."""
    start = time.perf_counter()
    try:
        result = polefit.identify(case.responses)
    except polefit.PolefitError as error:
        return Answer("error", str(error), seconds=time.perf_counter() - start)
    seconds = time.perf_counter() - start
    claims = tuple(_claimed(mode) for mode in result.modes if mode.in_band)
    outside = tuple(_claimed(mode) for mode in result.modes if not mode.in_band)
    return Answer(result.verdict, result.reason, claims, outside, result.fit.order, seconds)


def _claimed(mode: Mode) -> Claim:
    growth, frequency = mode.growth_rate_per_s, mode.frequency_hz

    def interval(low: float | None, high: float | None, unit: float) -> tuple[float, float] | None:
        return None if low is None or high is None else (low * unit, high * unit)

    turn = 2 * np.pi
    return Claim(
        mode.pole_rad_per_s,
        growth.std or 0.0,
        (frequency.std or 0.0) * turn,
        interval(growth.low, growth.high, 1.0),
        interval(frequency.low, frequency.high, turn),
    )


def ask_aaa(case: Case) -> Answer:
    """Take SciPy's AAA of each channel at face value, its tolerance set from the exact noise."""
    start = time.perf_counter()
    data = case.responses
    scale = 2 * np.pi * data.frequency_hz[-1]
    s = 2j * np.pi * data.frequency_hz / scale
    claims: list[Claim] = []
    for values in data.values.T:
        used = s.imag > 0
        both = np.concatenate([s[used], s[used].conj()])
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            fit = AAA(
                both,
                np.concatenate([values[used], values[used].conj()]),
                rtol=max(3 * case.noise_relative, 1e-12),
                max_terms=AAA_TERMS,
            )
            poles, residues = fit.poles(), fit.residues()
        claims += _face_value(poles * scale, residues * scale, case, float(np.abs(values).max()))
    seconds = time.perf_counter() - start
    return Answer(_naive_verdict(claims), claims=tuple(claims), seconds=seconds)


def ask_fixed_order(case: Case) -> Answer:
    """Fit `FIXED_ORDER` poles by plain vector fitting and take them at face value."""
    start = time.perf_counter()
    data = case.responses
    scale = 2 * np.pi * data.frequency_hz[-1]
    s = 2j * np.pi * data.frequency_hz / scale
    values = np.ascontiguousarray(data.values.T)
    weight = np.repeat(1 / np.abs(values).max(axis=1)[:, None, None], s.size, axis=2)
    block = make_block(s, values, np.repeat(weight, 2, axis=1))
    sections = starting_sections(float(s[0].imag), 1.0, FIXED_ORDER)
    for _ in range(SWEEPS):
        sections = relocate([block], sections, 2)
    poles = sections.poles()
    basis = np.stack([*(1 / (s - p) for p in poles), np.ones_like(s), s], axis=1)
    residues = np.linalg.lstsq(basis, values.T, rcond=None)[0][: poles.size]
    largest = np.abs(values).max(axis=1)
    size = (np.abs(residues) / largest).max(axis=1)
    claims = _face_value(poles * scale, size * scale, case, 1.0)
    seconds = time.perf_counter() - start
    return Answer(_naive_verdict(claims), claims=tuple(claims), order=FIXED_ORDER, seconds=seconds)


def _face_value(
    poles: ComplexArray, residues: ComplexArray, case: Case, largest: float
) -> list[Claim]:
    band = float(case.responses.frequency_hz[0]), float(case.responses.frequency_hz[-1])
    kept = []
    for p, r in zip(poles, residues, strict=True):
        tall = abs(r) > NEGLIGIBLE * largest * max(abs(p.real), 1e-300)
        inside = band[0] <= max(p.imag, 0.0) / (2 * np.pi) <= band[1]
        if p.imag > 0 and inside and tall and place(complex(p), band) == "inside":
            kept.append(Claim(complex(p)))
    return kept


def _naive_verdict(claims: list[Claim]) -> str:
    return "unstable" if any(c.pole.real > 0 for c in claims) else "stable"


TOOLS: dict[str, Callable[[Case], Answer]] = {
    "polefit": ask_polefit,
    "AAA": ask_aaa,
    "fixed order": ask_fixed_order,
}
