"""How strongly a mode shows at each node, in the one order that text, page and figures share."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from polefit.engine.propagation import pole_jacobian
from polefit.estimates import Estimate, si
from polefit.modes import Identification, Mode, NodeView
from polefit.report.phrases import percent, plain, uncrowded

MILLISIEMENS = 1e-3
HARDLY_SEEN = 1e-3  # of the strongest residue
NOTHING = 1e-9  # of the strongest residue: no simulator resolves it, its sign means nothing
ALWAYS = 3  # nodes of a loop that are listed however weak
LEVERAGE_NOTE = (
    "Behind each node: damping ratio added by 1 mS to ground, first order; negative makes it worse"
)
RESIDUE_NOTE = "Behind each node: its residue, relative to the strongest"
MIXED_NOTE = "where in percent: residue, relative to the strongest"


@dataclass(frozen=True)
class NodeStrength:
    """How strongly a mode shows at one channel, ready to print.

    Parameters
    ----------
    name : str
        The channel.
    node : str
        Its output.
    damping_per_ms : Estimate or None
        Damping ratio added by 1 mS of shunt conductance there, to first order.
    leverage : Estimate or None
        As in the mode's node view.
    size : float
        ``|residue|``.
    relative : float
        ``|residue|`` over that of the strongest channel.
    """

    name: str
    node: str
    damping_per_ms: Estimate | None
    leverage: Estimate | None
    size: float
    relative: float

    @property
    def brief(self) -> str:
        """Name and strength in a few characters; no sign where none can be told."""
        added = self.damping_per_ms
        if added is None:
            return f"{self.name} {percent(self.relative)}"
        if self.relative < NOTHING or _includes_zero(added):
            return f"{self.name} ≈ 0"
        return (
            f"{self.name} {'+' if added.value > 0 else ''}{si(added.value, '', 2, keep_zeros=True)}"
        )


def _includes_zero(estimate: Estimate) -> bool:
    low, high = estimate.low, estimate.high
    return estimate.value == 0 or (low is not None and high is not None and low <= 0 <= high)


def node_strengths(mode: Mode) -> tuple[NodeStrength, ...]:
    """Return the channels of a mode, strongest leverage first, then by residue.

    Notes
    -----
    A conductance G at a node moves the pole by −r·G (r the residue of the driving-point
    impedance there); the change of ζ follows with the exact derivatives of ζ.
    """
    strongest = max((abs(view.residue) for view in mode.nodes), default=0.0)
    found = [
        NodeStrength(
            name=str(view.channel),
            node=view.channel.output,
            damping_per_ms=_damping_per_ms(mode, view),
            leverage=view.leverage,
            size=abs(view.residue),
            relative=abs(view.residue) / strongest if strongest > 0 else 0.0,
        )
        for view in mode.nodes
    ]
    return tuple(sorted(found, key=_order))


def _order(strength: NodeStrength) -> tuple[bool, float]:
    leverage = strength.leverage
    return leverage is None, -(strength.size if leverage is None else abs(leverage.value))


def _damping_per_ms(mode: Mode, view: NodeView) -> Estimate | None:
    if view.leverage is None or mode.real or mode.pole_rad_per_s == 0:
        return None
    along_sigma, along_omega = pole_jacobian(mode.pole_rad_per_s)[2] * -MILLISIEMENS
    value = along_sigma * view.leverage.value + along_omega * view.residue.imag
    std = view.leverage.std
    return Estimate.normal(float(value), None if std is None else abs(float(along_sigma)) * std)


def strongest_node(mode: Mode) -> str | None:
    """Name of the node at which a mode shows most; None where no channel is known."""
    strengths = node_strengths(mode)
    return strengths[0].node if strengths else None


def node_note(modes: Sequence[Mode]) -> str:
    """Say what the numbers behind the nodes of these modes mean."""
    views = [s for mode in modes for s in node_strengths(mode)]
    with_leverage = sum(s.damping_per_ms is not None for s in views)
    if not views:
        return ""
    if with_leverage == 0:
        return f"{RESIDUE_NOTE}."
    return f"{LEVERAGE_NOTE}." if with_leverage == len(views) else f"{LEVERAGE_NOTE}; {MIXED_NOTE}."


def loop_strengths(result: Identification, index: int) -> tuple[NodeStrength, ...]:
    """Return one entry for each node of a suspect loop: its leverage where known, else a transfer.

    Sizes are relative to the strongest of them.
    """
    loop = result.loops[index]
    first: dict[str, NodeStrength] = {}
    for strength in node_strengths(result.modes[loop.mode]):
        if strength.node in loop.nodes:
            first.setdefault(strength.node, strength)
    return tuple(first.values())


def loop_table(result: Identification, index: int, most: int) -> list[tuple[str, ...]]:
    """Tabulate the nodes of a suspect loop: headings, then at most `most` rows.

    Columns that would stay empty are left out, and so are nodes that hardly see the mode. The
    residues are relative to the strongest that is listed.
    """
    found = loop_strengths(result, index)
    strongest = max((s.size for s in found), default=0.0)
    seen = [s for s in found if s.size >= HARDLY_SEEN * strongest]
    listed = (seen if len(seen) >= ALWAYS else list(found[:ALWAYS]))[:most]
    reference = max((s.size for s in listed), default=0.0) or 1.0
    rows = [("node", "damping ratio added per mS", "leverage in 1/(s·S)", "residue")]
    for strength in listed:
        nothing = strength.relative < NOTHING
        rows.append(
            (
                plain(strength.name, 30),
                _cell(strength.damping_per_ms, nothing),
                _cell(strength.leverage, nothing),
                percent(strength.size / reference),
            )
        )
    keep = [c for c in range(4) if c == 0 or any(row[c] for row in rows[1:])]
    return [tuple(row[c] or "–" for c in keep) for row in rows]


def _cell(estimate: Estimate | None, nothing: bool) -> str:
    if estimate is None:
        return ""
    return "≈ 0" if nothing else uncrowded(estimate.text())


def more_nodes(count: int) -> str:
    """Say how many nodes of a loop are not listed."""
    return f"and {count} more node{'' if count == 1 else 's'} at which it shows less"
