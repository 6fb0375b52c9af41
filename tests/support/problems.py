"""Weighted least-squares problems in the engine's own terms, everything about them known."""

from __future__ import annotations

import numpy as np

from polefit.engine.blocks import make_block, weighted
from polefit.engine.projection import normal_equations, solve
from polefit.engine.sections import evaluate, from_poles

POLES = np.array([-0.02 + 0.3j, 0.015 + 0.55j, -0.1 + 0.8j, -0.4 + 0j])
"""Normalised; one pair grows, one pole is real."""
RESIDUES = np.array(
    [[0.05 + 0.01j, 0.02 - 0.03j], [0.02 - 0.02j, 0.04j], [0.3 + 0.1j, -0.2], [0.5, -0.3]]
)
"""Of the four poles in two channels."""


def axis(points=201, low=0.01, high=1.0):
    """Normalised s = jω, evenly spaced."""
    return 1j * np.linspace(low, high, points)


def response(s, poles=POLES, residues=RESIDUES, constant=0.5, proportional=0.1):
    """Partial fractions, (K, N), poles given once for each pair."""
    poles = np.asarray(poles, dtype=complex)
    residues = np.asarray(residues, dtype=complex).reshape(len(poles), -1)
    pair = poles.imag > 0
    total = (1 / (s[:, None] - poles)) @ residues
    total += (1 / (s[:, None] - poles[pair].conj())) @ residues[pair].conj()
    return (total + constant + s[:, None] * proportional).T


def noise(generator, shape, std=1.0):
    """Complex noise with this standard deviation in each part."""
    parts = generator.standard_normal((2, *shape))
    return std * (parts[0] + 1j * parts[1])


def block(s, values, std=1.0):
    """Block with the same standard deviation everywhere."""
    values = np.atleast_2d(values)
    return make_block(s, values, np.full((values.shape[0], 2, s.size), 1 / std))


def uneven_block(generator, s, values):
    """Block with its own weight and turn at every sample: nothing cancels by symmetry."""
    weight = generator.uniform(0.5, 2.0, (values.shape[0], 2, s.size))
    turn = np.exp(2j * np.pi * generator.uniform(size=values.shape))
    return make_block(s, values, weight, turn)


def design(one, sections, direct):
    """Weighted real columns of the basis, (K, 2N, m)."""
    return weighted(one, evaluate(sections, one.s, direct))


def joint_jacobian(blocks, solution, step=1e-6):
    """Weighted derivatives by every linear parameter, block after block, then by the poles.

    The columns of the poles are central differences, with products of coefficients and √|c0|
    held, as the engine holds them.
    """
    sections, direct = solution.sections, solution.direct
    p, theta = sections.c1.size, sections.vector()
    rows, own = [], []
    for one, part in zip(blocks, solution.parts, strict=True):
        held = part.coefficients.copy()
        held[:, p : 2 * p] *= sections.weights()

        def predicted(vector, one=one, held=held):
            moved = sections.with_vector(vector)
            used = held.copy()
            used[:, p : 2 * p] /= moved.weights()
            return np.einsum("krm,km->kr", design(one, moved, direct), used)

        shifts = step * np.eye(theta.size)
        by_pole = [(predicted(theta + d) - predicted(theta - d)) / (2 * step) for d in shifts]
        rows.extend(np.stack(by_pole, axis=2))
        own.extend(design(one, sections, direct))
    m = sections.order + direct
    total = sum(r.shape[0] for r in rows)
    jacobian = np.zeros((total, m * len(rows) + theta.size))
    at = 0
    for k, (linear, poles) in enumerate(zip(own, rows, strict=True)):
        jacobian[at : at + len(linear), k * m : (k + 1) * m] = linear
        jacobian[at : at + len(linear), m * len(rows) :] = poles
        at += len(linear)
    return jacobian


def settle(blocks, solution, held=(), steps=6):
    """Gauss-Newton in all pole parameters but those `held`, from close by."""
    free = np.setdiff1d(np.arange(solution.sections.order), held)
    for _ in range(steps):
        information, gradient = normal_equations(solution)
        move = np.zeros(gradient.size)
        move[free] = np.linalg.solve(information[np.ix_(free, free)], gradient[free])
        moved = solution.sections.with_vector(solution.sections.vector() + move)
        solution = solve(blocks, moved, solution.direct)
    return solution


def true_sections(poles=POLES):
    """Sections of the poles, pairs first."""
    return from_poles(np.asarray(poles, dtype=complex))


def sorted_poles(sections):
    """Poles in an order that does not depend on how they were found."""
    return np.sort_complex(sections.poles())
