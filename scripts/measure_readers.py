"""Measure the readers on large files: seconds, and peak memory over the size of the array.

Each format is written once (100,000 points x 50 channels unless told otherwise) into a temporary
directory and read in a process of its own, whose peak of resident memory above its start is
taken. Resident memory counts the pages of a mapped file as well, which the system may drop at
any time; the peak of allocated memory is printed beside it.
"""

from __future__ import annotations

import argparse
import resource
import subprocess
import sys
import tempfile
import time
import tracemalloc
from collections.abc import Callable
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

ComplexArray = NDArray[np.complex128]


def responses(points: int, channels: int, rows: slice) -> tuple[NDArray[np.float64], ComplexArray]:
    """Rows of an invented response, the same whatever the slice."""
    frequency = np.linspace(1e9, 2e9, points)[rows]
    centre = np.linspace(1.1e9, 1.9e9, channels)
    values = 50 / (1 + 200j * (frequency[:, np.newaxis] / centre - 1))
    return frequency, np.asarray(values, dtype=np.complex128)


def write_text(path: Path, points: int, channels: int, row: Callable[..., str], head: str) -> None:
    """Write a text file block by block."""
    with path.open("w", encoding="utf-8") as file:
        file.write(head)
        for start in range(0, points, 1000):
            frequency, values = responses(points, channels, slice(start, start + 1000))
            numbers = values.view(np.float64)
            file.write("".join(row(start + i, f, numbers[i]) for i, f in enumerate(frequency)))


def write_delimited(path: Path, points: int, channels: int) -> None:
    head = ["freq [Hz]"]
    head += [f"{part}(Z(n{k})) [Ohm]" for k in range(channels) for part in ("Re", "Im")]
    form = ",".join(["%.12e"] * (2 * channels + 1)) + "\n"
    write_text(path, points, channels, lambda _, f, v: form % (f, *v), ",".join(head) + "\n")


def raw_head(points: int, channels: int, kind: str) -> str:
    names = "".join(f"\t{k + 1}\tv(n{k})\tvoltage\n" for k in range(channels))
    return (
        "Title: invented\nDate: none\nPlotname: AC Analysis\nFlags: complex\n"
        f"No. Variables: {channels + 1}\nNo. Points: {points}\nVariables:\n"
        f"\t0\tfrequency\tfrequency\n{names}{kind}:\n"
    )


def write_raw_ascii(path: Path, points: int, channels: int) -> None:
    form = "%d\t\t%.15e,%.15e\n" + "\t%.15e,%.15e\n" * channels
    write_text(
        path,
        points,
        channels,
        lambda i, f, v: form % (i, f, 0.0, *v),
        raw_head(points, channels, "Values"),
    )


def write_raw_binary(path: Path, points: int, channels: int) -> None:
    with path.open("wb") as file:
        file.write(raw_head(points, channels, "Binary").encode())
        for start in range(0, points, 1000):
            frequency, values = responses(points, channels, slice(start, start + 1000))
            file.write(np.column_stack((frequency, values)).astype("<c16").tobytes())


def write_touchstone(path: Path, points: int, channels: int) -> None:
    ports = max(1, round(channels**0.5))
    count = ports * ports
    per_line = [2 * min(4, ports - start) for start in range(0, ports, 4)] * ports
    form = "%.12e" + "\n".join(" %.12e" * n for n in per_line) + "\n"
    if ports == 2:
        form = "%.12e" + " %.12e" * 8 + "\n"
    write_text(path, points, count, lambda _, f, v: form % (f, *v), "# Hz S RI R 50\n")


def write_hdf5(path: Path, points: int, channels: int) -> None:
    import polefit

    frequency, values = responses(points, channels, slice(None))
    names = [f"n{k}" for k in range(channels)]
    data = polefit.ResponseSet.from_arrays(frequency, values, channels=names, quantity="impedance")
    polefit.write_hdf5(path, data)


FORMATS: dict[str, tuple[Callable[[Path, int, int], None], str, dict[str, str]]] = {
    "delimited text": (write_delimited, "large.csv", {}),
    "SPICE raw, ASCII": (write_raw_ascii, "ascii.raw", {"driven": "n0"}),
    "SPICE raw, binary": (write_raw_binary, "binary.raw", {"driven": "n0"}),
    "Touchstone": (write_touchstone, "large.s7p", {}),
    "HDF5": (write_hdf5, "large.h5", {}),
}


def read_once(path: str, options: dict[str, str], traced: bool) -> None:
    """Read a file and print seconds, array bytes, resident and allocated peak."""
    import polefit
    import polefit.readers.delimited
    import polefit.readers.hdf5_safely
    import polefit.readers.spice_raw
    import polefit.readers.touchstone  # imports are not to be measured

    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    if traced:
        tracemalloc.start()
    start = time.perf_counter()
    found = polefit.read(path, **options)  # type: ignore[arg-type]
    seconds = time.perf_counter() - start
    allocated = tracemalloc.get_traced_memory()[1] if traced else 0
    resident = (resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before) * 1024
    print(seconds, found.values.nbytes, resident, allocated)


def measured(path: Path, options: dict[str, str], traced: bool) -> list[float]:
    command = [sys.executable, __file__, "--read", str(path), "--options", repr(options)]
    done = subprocess.run(
        command + (["--traced"] if traced else []), capture_output=True, text=True, check=False
    )
    if done.returncode:
        raise SystemExit(done.stderr)
    return [float(x) for x in done.stdout.split()]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--points", type=int, default=100_000)
    parser.add_argument("--channels", type=int, default=50)
    parser.add_argument("--only", help="part of the name of a format")
    parser.add_argument("--read", help=argparse.SUPPRESS)
    parser.add_argument("--options", default="{}", help=argparse.SUPPRESS)
    parser.add_argument("--traced", action="store_true", help=argparse.SUPPRESS)
    given = parser.parse_args()
    if given.read:
        import ast

        read_once(given.read, ast.literal_eval(given.options), given.traced)
        return
    print(f"{given.points} points x {given.channels} channels")
    print(f"{'format':20} {'file MB':>8} {'seconds':>8} {'resident/array':>15} {'allocated':>10}")
    for name, (write, file, options) in FORMATS.items():
        if given.only and given.only.lower() not in name.lower():
            continue
        with tempfile.TemporaryDirectory() as folder:
            path = Path(folder) / file
            write(path, given.points, given.channels)
            seconds, size, resident, _ = measured(path, options, traced=False)
            allocated = measured(path, options, traced=True)[3]
            print(
                f"{name:20} {path.stat().st_size / 1e6:8.0f} {seconds:8.2f} "
                f"{resident / size:15.2f} {allocated / size:10.2f}",
                flush=True,
            )


if __name__ == "__main__":
    main()
