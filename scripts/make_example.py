"""Make the bundled example: node impedances and exact poles of an invented amplifier.

    python scripts/make_example.py [DIRECTORY]

Reads ``amplifier.cir`` beside the data and writes one Touchstone file per probed node and
``truth.json`` into DIRECTORY (by default where the netlist is). Deterministic.
"""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import Any

import numpy as np
from circuits import Circuit, ComplexArray, FloatArray

HOME = Path(__file__).resolve().parents[1] / "datasets" / "three_stage_amplifier"
NETLIST = "amplifier.cir"
NODES = ("in", "drain1", "gate2a", "gate2b", "drain2a", "out", "vdd")
NAMED_MODES = {
    "bias network": 3.7e6,
    "output bypass": 0.96e9,
    "odd mode of stage 2": 9.07e9,
}
"""Modes that the example is about, by roughly where they ring, in hertz."""
HEADER = """\
! Invented data: impedance seen at node {node} of the amplifier in {netlist},
! every other node as terminated there. Small-signal, 1 A into the node.
# Hz Z RI R 1
"""


def frequency_axis() -> FloatArray:
    """Return the sweep in hertz, as printed with nine digits.

    Logarithmic for the bias network, fine steps up to 2 GHz, coarser ones to 12 GHz.
    """
    parts = (
        np.geomspace(0.5e6, 100e6, 93)[:-1],
        np.arange(100e6, 2e9, 10e6),
        np.arange(2e9, 12e9 + 1, 40e6),
    )
    return np.array([float(f"{f:.8e}") for f in np.concatenate(parts)])


def touchstone(node: str, frequency_hz: FloatArray, impedance: ComplexArray) -> str:
    """Print a one-port Touchstone 1.1 file with nine significant digits, in ohm."""
    rows = (
        f"{f:.8e} {z.real: .8e} {z.imag: .8e}\n"
        for f, z in zip(frequency_hz, impedance, strict=True)
    )
    return HEADER.format(node=node, netlist=NETLIST) + "".join(rows)


def truth(circuit: Circuit) -> dict[str, Any]:
    """Return the exact poles, one of each pair, and the residues of the named modes."""
    upper = [complex(p) for p in circuit.poles() if p.imag >= 0]
    modes = []
    for name, near in NAMED_MODES.items():
        pole = min(upper, key=lambda p: abs(p.imag / (2 * np.pi) - near))
        residues = circuit.residues(pole, [(n, n) for n in NODES])
        modes.append(
            {
                "name": name,
                **_described(pole),
                "residues_ohm_rad_per_s": {
                    n: {"real": r.real, "imag": r.imag}
                    for n, r in zip(NODES, residues, strict=True)
                },
            }
        )
    return {
        "about": "exact poles of the invented amplifier in amplifier.cir: generalised "
        "eigenvalues of its nodal equations; made by scripts/make_example.py",
        "nodes": list(NODES),
        "modes": modes,
        "poles": [_described(p) for p in upper],
    }


def _described(pole: complex) -> dict[str, Any]:
    return {
        "pole_rad_per_s": {"real": pole.real, "imag": pole.imag},
        "frequency_hz": pole.imag / (2 * np.pi),
        "damping_ratio": -pole.real / abs(pole),
    }


def make(directory: Path) -> list[Path]:
    """Write all files of the example into `directory` and return their paths."""
    circuit = Circuit.from_netlist((HOME / NETLIST).read_text(encoding="utf-8"))
    frequency = frequency_axis()
    table = circuit.driving_points(frequency, NODES)
    texts = {
        f"{node}.s1p": touchstone(node, frequency, table[:, k]) for k, node in enumerate(NODES)
    }
    texts["truth.json"] = json.dumps(truth(circuit), indent=1) + "\n"
    directory.mkdir(parents=True, exist_ok=True)
    for name, text in texts.items():
        (directory / name).write_text(text, encoding="utf-8")
    return [directory / name for name in texts]


if __name__ == "__main__":
    target = Path(sys.argv[1]) if len(sys.argv) > 1 else HOME
    for path in make(target):
        print(path)
