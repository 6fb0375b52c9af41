"""Results built by hand from an invented three-mode example, to print and to draw."""

from dataclasses import replace

import numpy as np

from polefit.engine.propagation import pole_estimates
from polefit.estimates import Estimate
from polefit.modes import (
    BackgroundPole,
    Detection,
    Evidence,
    FitQuality,
    Identification,
    Loop,
    Mode,
    NodeView,
    RationalModel,
)
from polefit.responses import Channel, ResponseSet, Source

TWO_PI = 2 * np.pi
# Invented poles: frequency in Hz, damping ratio, standard uncertainty of both parts over |p|.
POLES = ((1.504321e9, -0.0123, 2e-4), (0.812e9, 0.0215, 1.5e-4), (38e6, 0.35, 4e-3))
NODES = ("gate2", "drain1", "drain2", "out", "bias")


def pole_of(frequency_hz, damping):
    natural = TWO_PI * frequency_hz / np.sqrt(1 - damping**2)
    return complex(-damping * natural, TWO_PI * frequency_hz)


def build_mode(pole, relative_std, residues, channels, verdict, evidence):
    std = relative_std * abs(pole)
    covariance = ((std**2, 0.3 * std**2), (0.3 * std**2, std**2))
    found = pole_estimates(pole, covariance)
    nodes = tuple(
        NodeView(
            channel=channel,
            residue=complex(r),
            residue_std=0.01 * abs(r) + 2e8,
            share=float(abs(r) / 1e10),
            leverage=Estimate.normal(float(r.real), 0.01 * abs(r) + 2e8)
            if channel.driving_point
            else None,
        )
        for channel, r in sorted(zip(channels, residues, strict=True), key=lambda p: -abs(p[1]))
    )
    probability = {"unstable": 1.0, "stable": 0.0, "undecided": 0.62}[verdict]
    return Mode(
        pole_rad_per_s=pole,
        covariance=covariance,
        frequency_hz=found.frequency_hz,
        natural_frequency_hz=found.natural_frequency_hz,
        damping_ratio=found.damping_ratio,
        growth_rate_per_s=found.growth_rate_per_s,
        verdict=verdict,
        probability_unstable=probability,
        significance=212.4,
        in_band=True,
        evidence=evidence,
        nodes=nodes,
    )


def with_pole(mode, pole, covariance=((0.0, 0.0), (0.0, 0.0))):
    """The same mode with another pole."""
    found = pole_estimates(pole, covariance)
    return replace(
        mode,
        pole_rad_per_s=pole,
        covariance=covariance,
        frequency_hz=found.frequency_hz,
        natural_frequency_hz=found.natural_frequency_hz,
        damping_ratio=found.damping_ratio,
        growth_rate_per_s=found.growth_rate_per_s,
    )


def build_model(poles, weights, channels, nodes):
    """Conjugate pairs with residues of rank 1, as at a simple pole of a circuit."""
    outputs = [nodes.index(c.output) for c in channels]
    inputs = [nodes.index(c.input) for c in channels]
    residues = weights[:, outputs] * weights[:, inputs]
    return RationalModel(
        poles=np.concatenate([poles, poles.conj()]),
        residues=np.concatenate([residues, residues.conj()]),
        constant=np.full(len(channels), 4.0),
        proportional=np.zeros(len(channels)),
        channels=channels,
    )


def example(verdict="unstable", nodes=NODES, points=301, noise=2e-3, wide=False, files=True):
    """One of the three answers, over `nodes` driven one at a time.

    `wide` asks for five decades on a logarithmic axis.
    """
    rng = np.random.default_rng(7)
    channels = tuple(Channel(name, name) for name in nodes)
    damping = {"unstable": -0.0123, "stable": 0.0145, "undecided": -0.00004}[verdict]
    poles = np.array([pole_of(POLES[0][0], damping), *(pole_of(f, z) for f, z, _ in POLES[1:])])
    weights = rng.uniform(0.15, 1.0, (3, len(nodes))) * np.exp(1j * rng.normal(0, 0.2, (3, 1)))
    weights *= np.sqrt(np.array([[6e11], [4e11], [6e10]]))
    weights[0, -1] *= 0.02
    weights[0, 1 % len(nodes)] *= 1j  # there a shunt resistor makes it worse
    model = build_model(poles, weights, channels, list(nodes))
    low, high = (1e5, 6e9) if wide else (0.01e9, 2.5e9)
    axis = np.geomspace(low, high, points) if wide else np.linspace(low, high, points)
    exact = model.response(axis)
    parts = rng.normal(size=(*exact.shape, 2)) @ np.array([1, 1j])
    values = exact * (1 + noise / np.sqrt(2) * parts)
    responses = tuple(
        replace(
            ResponseSet.from_arrays(axis, values[:, k], channels=[channel], quantity="impedance"),
            source=Source(
                f"{channel.output}.csv",
                f"{k:02x}" * 32,
                "delimited text",
                ("Headings name ohm; numbers taken as real and imaginary part.",),
            )
            if files
            else None,
        )
        for k, channel in enumerate(channels)
    )
    tests = (
        Evidence(
            "stable-model misfit",
            verdict != "undecided",
            "the best model without growing poles fits 34 times worse than the free one",
        ),
        Evidence("persistence", True, "found at orders 8, 10, 12 and 14 within 0.4 std"),
        Evidence("rank", None, "no transfer between the nodes was given"),
    )
    spread = POLES[0][2]
    modes = [build_mode(poles[0], spread, model.residues[0], channels, verdict, tests)]
    for i in (1, 2):
        modes.append(
            build_mode(poles[i], POLES[i][2], model.residues[i], channels, "stable", tests[1:2])
        )
    background = (
        BackgroundPole(complex(-3.1e10, 0.0), "real pole above the band"),
        BackgroundPole(complex(2e7, TWO_PI * 1.9e9), "residue 1.2 std at best: not significant"),
        BackgroundPole(complex(-2e9, TWO_PI * 2.9e9), "above the band"),
    )
    tried = np.geomspace(max(low, 1e6), high, 40)
    limits = rng.uniform(0.6, 1.6, len(channels)) * np.geomspace(2e7, 2e9, 40)[:, np.newaxis]
    detection = Detection(
        frequency_hz=tried,
        damping_ratio=-0.01,
        power=0.95,
        residue=limits,
        response=np.abs(model.response(tried)),
        leverage=limits,
        blind_hz=((),) * len(channels),
    )
    return Identification(
        verdict=verdict,
        reason={
            "unstable": "one mode in the band grows at more than 99.99 % confidence",
            "stable": "every significant mode in the band decays at the stated confidence",
            "undecided": "the mode at 1.504 GHz is closer to the axis than the data can tell",
        }[verdict],
        confidence=0.95,
        band_hz=(low, high),
        responses=responses,
        modes=tuple(modes),
        background=background,
        loops=(Loop(0, tuple(view.channel.output for view in modes[0].nodes)),),
        fit=FitQuality(
            order=10,
            order_reason="lowest BIC; two more poles gain 3.1, less than they cost",
            rms_relative=noise * 1.02,
            noise_relative=noise,
            noise_origin="relative noise, estimated from the residual",
            residual_white=True,
            stable_model_misfit=34.1 if verdict == "unstable" else 1.0,
        ),
        model=model,
        detection=detection,
        next_points_hz=tuple(np.linspace(1.49e9, 1.52e9, 9)) if verdict == "undecided" else (),
        notes=("Reference direction of the probe taken from ground into the node.",),
    )
