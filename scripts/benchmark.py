"""Time and memory of a whole identification, beside two general-purpose libraries.

    scripts/benchmark [--quick] [--repeats N]

One run, one BLAS thread, medians. The others are given the easier task: scikit-rf's vector fit
gets the order that identification found and one channel; SciPy's AAA gets one channel at a time
and no noise model. Nothing is written.
"""

from __future__ import annotations

import argparse
import statistics
import time
import tracemalloc
import warnings
from collections.abc import Callable
from pathlib import Path

import numpy as np
import skrf
from numpy.typing import NDArray
from scipy.interpolate import AAA
from skrf.vectorFitting import VectorFitting
from threadpoolctl import threadpool_limits

import polefit

CASES = ((1, 201), (3, 401), (30, 1001))
POINTS = (201, 1001, 10_001, 100_001)
CHANNELS = (1, 3, 10, 30, 100)
CHANNELS_POINTS = 1001
NOISE = 1e-4
PACKAGE = Path(polefit.__file__).parent


def amplifier_like(channels: int, points: int, seed: int = 1) -> polefit.ResponseSet:
    """Impedances of an invented circuit: six pairs and two real poles, one pair growing."""
    generator = np.random.default_rng(seed)
    natural = 2e9 * np.pi * np.array([0.6, 1.3, 2.2, 3.1, 4.4, 5.2])
    zeta = np.array([0.2, 0.02, -0.01, 0.08, 0.03, 0.15])
    pairs = natural * (-zeta + 1j * np.sqrt(1 - zeta**2))
    poles = np.concatenate([pairs, pairs.conj(), 2e9 * np.pi * np.array([-0.4, -3.0])])
    upper = generator.standard_normal((6, channels)) + 1j * generator.standard_normal((6, channels))
    real = 3 * generator.standard_normal((2, channels))
    residues = 2e10 * np.concatenate([upper, upper.conj(), real])
    hz = np.linspace(0.1e9, 6e9, points)
    values = 1 / (2j * np.pi * hz[:, None] - poles) @ residues + generator.uniform(5, 20, channels)
    noise = generator.standard_normal((2, *values.shape)) * NOISE * np.abs(values) / np.sqrt(2)
    return polefit.ResponseSet.from_arrays(
        hz,
        values + noise[0] + 1j * noise[1],
        channels=[f"n{k}" for k in range(channels)],
        quantity="impedance",
    )


def median_seconds(task: Callable[[], object], repeats: int) -> float:
    """Median wall time of `task`, after one call to warm up."""
    task()
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        task()
        times.append(time.perf_counter() - start)
    return statistics.median(times)


def peak_bytes(task: Callable[[], object]) -> int:
    """Largest memory that `task` held at once, as Python and NumPy report it."""
    tracemalloc.start()
    task()
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    return peak


def skrf_fit(responses: polefit.ResponseSet, order: int) -> Callable[[], object]:
    """One fixed-order vector fit of the first channel by scikit-rf."""
    network = skrf.Network(f=responses.frequency_hz, f_unit="Hz", z0=50)
    size = np.abs(responses.values[:, 0]).max()
    network.s = (responses.values[:, 0] / size)[:, None, None]

    def run() -> object:
        fit = VectorFitting(network)
        fit.vector_fit(n_poles_real=order % 2, n_poles_cmplx=order // 2)
        return fit

    return run


def aaa_fits(responses: polefit.ResponseSet, channels: int) -> Callable[[], object]:
    """One AAA call for each channel by SciPy, down to the noise, poles included."""
    s = 2j * np.pi * responses.frequency_hz / responses.frequency_hz[-1]
    both = np.concatenate([s, s.conj()])

    def one(values: NDArray[np.complex128]) -> object:
        fit = AAA(both, np.concatenate([values, values.conj()]), rtol=3 * NOISE)
        return fit.poles(), fit.residues()

    return lambda: [one(responses.values[:, k]) for k in range(channels)]


def compare(cases: tuple[tuple[int, int], ...], repeats: int) -> None:
    """Print the side-by-side table."""
    print("Whole identification beside one scikit-rf fit (same order, one channel) and SciPy's AAA")
    print("seconds, medians; ratios are identification over the other: 3 or less is the aim\n")
    heads = ("channels", "points", "order", "identify", "skrf fit", "ratio", "AAA, one", "ratio")
    print("".join(f"{head:>10}" for head in (*heads, "AAA, all", "ratio", "verdict")))
    for channels, points in cases:
        responses = amplifier_like(channels, points)
        result = polefit.identify(responses)
        ours = median_seconds(lambda r=responses: polefit.identify(r), repeats)  # type: ignore[misc]
        cells = f"{channels:10d}{points:10d}{result.fit.order:10d}{ours:10.3f}"
        others = (skrf_fit(responses, result.fit.order), aaa_fits(responses, 1))
        for other in (*others, aaa_fits(responses, channels)):
            theirs = median_seconds(other, repeats)
            cells += f"{theirs:10.3f}{ours / theirs:10.2f}"
        print(f"{cells}{result.verdict:>10}")


def growth(label: str, sizes: tuple[int, ...], make: Callable[[int], polefit.ResponseSet]) -> None:
    """Print time and peak memory over a size, with the exponents of their growth."""
    print(f"\nGrowth with {label}")
    print(f"{label:>9}   seconds  exponent   peak MB  exponent  times data  order")
    last: tuple[int, float, float] | None = None
    for size in sizes:
        responses = make(size)
        result = polefit.identify(responses)
        seconds = median_seconds(lambda r=responses: polefit.identify(r), 1)  # type: ignore[misc]
        peak = peak_bytes(lambda r=responses: polefit.identify(r))  # type: ignore[misc]
        steps = ["", ""]
        if last is not None:
            by = np.log(size / last[0])
            steps = [f"{np.log(seconds / last[1]) / by:.2f}", f"{np.log(peak / last[2]) / by:.2f}"]
        data = responses.values.nbytes + responses.frequency_hz.nbytes
        print(
            f"{size:9d} {seconds:9.3f} {steps[0]:>9} {peak / 1e6:9.1f} {steps[1]:>9}"
            f" {peak / data:11.1f} {result.fit.order:6d}"
        )
        last = size, seconds, peak


def count_lines() -> None:
    """Print how many lines each sub-package has."""
    print("\nLines of Python by package (all lines, and those that are neither blank nor comment)")
    folders = [PACKAGE, *sorted(p for p in PACKAGE.iterdir() if (p / "__init__.py").is_file())]
    sums = [0, 0]
    for folder in folders:
        lines = [
            line
            for path in folder.glob("*.py")
            for line in path.read_text(encoding="utf-8").splitlines()
        ]
        code = [line for line in lines if line.strip() and not line.strip().startswith("#")]
        name = "polefit" if folder == PACKAGE else f"polefit.{folder.name}"
        print(f"{name:20} {len(lines):6d} {len(code):6d}")
        sums = [sums[0] + len(lines), sums[1] + len(code)]
    print(f"{'total':20} {sums[0]:6d} {sums[1]:6d}")


def main() -> None:
    """Run all tables."""
    parser = argparse.ArgumentParser(prog="scripts/benchmark", description=__doc__.splitlines()[0])
    parser.add_argument("--quick", action="store_true", help="small sizes, few repeats")
    parser.add_argument("--repeats", type=int, help="repeats of each timing (5, or 3 if quick)")
    options = parser.parse_args()
    repeats = options.repeats or (3 if options.quick else 5)
    warnings.simplefilter("ignore")  # the libraries warn of passivity and of noise reached
    with threadpool_limits(1):
        compare(CASES[:2] if options.quick else CASES, repeats)
        growth("points", POINTS[:2] if options.quick else POINTS, lambda n: amplifier_like(1, n))
        growth(
            "channels",
            CHANNELS[:3] if options.quick else CHANNELS,
            lambda k: amplifier_like(k, CHANNELS_POINTS),
        )
    count_lines()


if __name__ == "__main__":
    main()
