"""Damaged files: whatever happens to a file, the reader answers with data or with one line.

Each format gets several hundred seeded mutations; warnings count as errors here, as everywhere.
"""

from pathlib import Path

import numpy as np
import pytest

import polefit
from polefit.errors import FileError, PolefitError
from polefit.precision import Precision, Printed
from polefit.responses import Source

DATA = Path(__file__).resolve().parents[1] / "data" / "simulator"
EACH = 120  # per base file; every format has at least two
TOKENS = [
    b"nan", b"inf", b"-", b"", b"1e999", b"-1e-999", b"9" * 400, b"0x10", b"1_0", b"1,5", b"1.5.2",
    b"\xff", b"\0", b"\xc2\xb0", b"(1,2)", b"1+2j", b"#", b"!", b"[End]", b"[Version] 2.0", b'"',
    b"Title:", b"Binary:\n", b"Values:\n", b"No. Points: 999999999999", b"-1", b"0", b"\n", b"\r",
    b"\t", b";", b",", b"99999999", b"# GHz Y MA R 1", "Ω".encode(), b"freq", b"%n", b"e", b"1d5",
]  # fmt: skip

DRIVEN = {"driven": "gate2"}
# Content, extension and options with which the whole file is read.
CASES = {
    "touchstone": [
        ("! invented\n# GHz S MA R 50\n"
         + "".join(f"{i} 0.{i}5 {20 * i} 3.57 157 .04 76 0.66 -14\n" for i in range(1, 9))
         + "2 1.1 0.3 45 0.2\n4 1.2 0.3 50 0.2\n", ".s2p", {}),
        ("[Version] 2.0\n# MHz Z RI R 50\n[Number of Ports] 3\n[Number of Frequencies] 4\n"
         "[Reference] 50 75\n 100\n[Matrix Format] Lower\n[Network Data]\n"
         + "".join(f"{i} " + "1.5 -2 2 3 9 1.5 -2 2 7 9 1 3\n" for i in range(1, 5))
         + "[End]\n", ".s3p", {"quantity": "admittance"}),
        ("#\n! Port[1] = in\n" + "".join(f"{i} {i / 7:.6f} {i * 11}\n" for i in range(1, 20)),
         ".s1p", {"quantity": "impedance"}),
        ("# Hz Y RI R 50 75\n" + "".join(f"{i} 1 2 3 4 5 6 7 8\n" for i in range(1, 20)),
         ".ts", {"scaling": "absolute"}),
    ],
    "delimited": [
        ("freq [GHz],Re(Z(a)) [Ohm],Im(Z(a)) [Ohm],Re(Z(b)),Im(Z(b))\n"
         + "".join(f"{i},{i / 7:.5f},{-i},{i / 3:.3e},2\n" for i in range(1, 12)), ".csv", {}),
        ("Frequenz (MHz);Re(Y);Im(Y)\n"
         + "".join(f"{i},5;{i},25;-{i},75\n" for i in range(1, 12)), ".csv", {}),
        ("freq (Hz)\tV(gate2)\n" + "".join(f"{i}e6\t({i}.5dB,{i}°)\n" for i in range(1, 12)),
         ".txt", DRIVEN),
        ("f (Hz),Z\n" + "".join(f"{i}e6,({i}.5-{i}j)\n" for i in range(1, 12)), ".csv", {}),
        ("".join(f"{i}e6 {i}.5 {i}\n" for i in range(1, 12)), ".dat",
         {"quantity": "impedance", "form": "magnitude-angle", "angle_unit": "deg"}),
        ((DATA / "wrdata_names.data").read_bytes(), ".data", DRIVEN),
        ((DATA / "two_node_print.log").read_bytes(), ".log", DRIVEN),
    ],
    "raw ascii": [
        ((DATA / "two_node_write.raw").read_bytes(), ".raw", DRIVEN),
        ((DATA / "two_node_batch_ascii.raw").read_bytes(), ".raw", DRIVEN),
    ],
    "raw binary": [
        ((DATA / "two_node_batch.raw").read_bytes(), ".raw", {**DRIVEN, "quantity": "transfer"}),
        ((DATA / "ports.raw").read_bytes(), ".raw", {}),
    ],
    "hdf5": [],  # made by hdf5()
}  # fmt: skip


def hdf5(folder):
    """Two files: one with every optional part, one with two plain sets."""
    frequency = np.linspace(1e9, 2e9, 40)
    plain = polefit.ResponseSet.from_arrays(
        frequency, np.outer(frequency, [1, 1j]), channels=["a", ("b", "a")], quantity="impedance"
    )
    full = polefit.ResponseSet(
        frequency_hz=frequency,
        values=plain.values,
        channels=plain.channels,
        quantity="scattering",
        pump_hz=1e9,
        reference_ohm=(50.0, 75.0),
        precision=Precision("real-imaginary", Printed(significant=6), Printed(decimals=2)),
        sample_std=np.ones((40, 2)),
        source=Source("a.s2p", "0" * 64, "Touchstone 1.0", ("one", "two")),
    )
    cases = []
    for name, data in (("full.h5", full), ("two.h5", [plain, plain])):
        polefit.write_hdf5(folder / name, data)
        cases.append(((folder / name).read_bytes(), ".h5", {}))
    return cases


def mutated(content, random):
    """One to three wounds: flipped, lost, doubled, moved or foreign bytes; or a cut."""
    data = bytearray(content)
    for _ in range(random.choice([1, 1, 1, 2, 4])):
        at = int(random.integers(0, max(len(data), 1)))
        length = int(random.choice([1, 1, 1, 2, 8, 60, 500]))
        match random.integers(0, 10):
            case 0:
                data[at : at + 1] = bytes([random.integers(0, 256)])
            case 9:
                data[at : at + 1] = bytes([random.choice(list(b"0123456789.-+eE ,;\n"))])
            case 1:
                del data[at : at + length]
            case 2:
                data[at:at] = data[at : at + length]
            case 3:
                data[at:at] = TOKENS[random.integers(0, len(TOKENS))]
            case 4:
                data[at : at + length] = TOKENS[random.integers(0, len(TOKENS))]
            case 5:
                other = int(random.integers(0, max(len(data), 1)))
                data[other:other] = data[at : at + length]
            case 6:
                data[at : at + length] = random.integers(0, 256, length, np.uint8).tobytes()
            case 7:
                del data[at:]
            case _:
                lines = data.split(b"\n")
                i, j = random.integers(0, len(lines), 2)
                lines[i], lines[j] = lines[j], lines[i]
                data = bytearray(b"\n".join(lines))
    return bytes(data)


@pytest.mark.parametrize("case", CASES)
def test_nothing_escapes(case, tmp_path):
    random = np.random.default_rng(2026)
    tried = refused = 0
    for base, suffix, options in CASES[case] or hdf5(tmp_path):
        raw = base if isinstance(base, bytes) else base.encode()
        path = tmp_path / f"damaged{suffix}"
        path.write_bytes(raw)
        assert polefit.read_all(path, **options)
        for _ in range(EACH):
            path.write_bytes(mutated(raw, random))
            tried += 1
            try:
                read = polefit.read_all(path, **options)
            except PolefitError as error:
                refused += 1
                text = str(error)
                assert text.isprintable()  # one line
                if isinstance(error, FileError):
                    assert text.startswith(f"{path}: ")
            else:
                assert read
                assert all(np.isfinite(one.values).all() for one in read)
    assert tried >= 200
    # Else the mutations are too gentle, or so rough that no parser beyond the first is reached.
    assert 0.2 < refused / tried < 0.95
