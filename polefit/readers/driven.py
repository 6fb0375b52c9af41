"""From the node voltages and branch currents of a simulation to responses.

A simulator saves voltages and currents under an AC source of 1 A or 1 V; which node or source
was driven is not in the file, so the user says it with ``driven=``.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from polefit.errors import AmbiguousFileError, ArgumentError, FormatError
from polefit.readers.reading import OpenQuestionError, ReadOptions, named_ports
from polefit.responses import Channel, ComplexArray, Quantity

_PARAMETER = re.compile(r"([syz])_(\d+)_(\d+)", re.IGNORECASE)
_PARAMETERS: dict[str, Quantity] = {"s": "scattering", "y": "admittance", "z": "impedance"}


@dataclass(frozen=True)
class Vector:
    """One saved vector.

    Parameters
    ----------
    name : str
        Node or source, without ``v( )`` or ``i( )``.
    current : bool
        Whether it is a branch current instead of a node voltage.
    """

    name: str
    current: bool = False


@dataclass(frozen=True)
class Responses:
    """How to make responses from vectors.

    Parameters
    ----------
    columns : tuple of int
        Index of the vector of each response.
    channels : tuple of Channel
        Where each response was taken.
    quantity : str
        What they are.
    sign : float
        Factor on every vector.
    divide_by : int or None
        Index of the vector to divide by.
    assumptions : tuple of str
        What this reading rests on.
    driven_by_current : int or None
        Index of the vector of the node into which a current is taken to be fed.
    """

    columns: tuple[int, ...]
    channels: tuple[Channel, ...]
    quantity: Quantity
    sign: float
    divide_by: int | None
    assumptions: tuple[str, ...]
    driven_by_current: int | None = None

    def refuse_driven_by_voltage(self, voltage: ComplexArray) -> None:
        """Refuse impedances where the driven voltage shows that a voltage source sets it.

        Parameters
        ----------
        voltage : (N,) complex ndarray
            That of the vector `driven_by_current`.

        Raises
        ------
        AmbiguousFileError
            If it is real and the same at every point.
        """
        if voltage.size > 1 and not voltage.imag.any() and np.all(voltage == voltage[0]):
            raise AmbiguousFileError(
                f"{self.channels[0].input} is at {voltage[0].real:g} V at every frequency: a "
                "voltage source drives it, so the voltages are no impedances",
                'say quantity="transfer" (--quantity), or name the source with driven= (--driven) '
                "for the admittance",
            )


def responses_of(vectors: Sequence[Vector], options: ReadOptions) -> Responses:
    """Settle which responses the vectors are.

    Parameters
    ----------
    vectors : sequence of Vector
        All vectors of the file.
    options : ReadOptions
        `driven`, `quantity` and `select` are used. Names are compared without regard to case.

    Returns
    -------
    Responses

    Raises
    ------
    AmbiguousFileError
        If `driven` is not given.
    ArgumentError
        If a name is not in the file or the quantity cannot be had from such data.
    FormatError
        If the file holds no vector of the kind that is needed.
    """
    if options.driven is None and options.quantity == "transfer":
        return _transfers(vectors, None, "source", options)
    if options.driven is None:
        raise _not_told(vectors)
    node = _find(vectors, options.driven, current=False)
    source = _find(vectors, options.driven, current=True)
    quantity = options.quantity
    if quantity is None:
        quantity = "impedance" if node is not None or source is None else "admittance"
    if quantity == "impedance":
        return _impedances(vectors, node, options)
    if quantity == "admittance":
        return _admittances(vectors, source, options)
    if quantity == "transfer":
        return _transfers(vectors, node, _source_name(vectors, node, source, options), options)
    raise ArgumentError(
        f"quantity: {quantity!r} cannot be had from voltages and currents under one source; "
        "use impedance, admittance or transfer"
    )


def _not_told(vectors: Sequence[Vector]) -> OpenQuestionError:
    """Ask what was driven; to look at the file alone, any answer will do."""
    voltages = any(not v.current for v in vectors)
    return OpenQuestionError(
        f"voltages and currents of a simulation ({_listed(vectors)}), but not what was driven",
        "say driven= (--driven) with the node fed by the 1 A AC source, or "
        'quantity="transfer" (--quantity) if a 1 V AC source drives the circuit',
        option="driven",
        presume={"quantity": "transfer"} if voltages else {"driven": f"i({vectors[0].name})"},
    )


def port_responses(vectors: Sequence[Vector], options: ReadOptions) -> Responses | None:
    """Find the network parameters s_i_j, y_i_j, z_i_j that an S-parameter analysis saves.

    Parameters
    ----------
    vectors : sequence of Vector
        All vectors of the file.
    options : ReadOptions
        `quantity` chooses among them, scattering if it is not given; `node` names the ports;
        `select` is used.

    Returns
    -------
    Responses or None
        None if there are none, or if `driven` asks for the voltages beside them.

    Raises
    ------
    ArgumentError
        If the quantity is not among them.
    """
    matches = {i: _PARAMETER.fullmatch(v.name) for i, v in enumerate(vectors) if not v.current}
    found = [(m[1].lower(), int(m[2]), int(m[3]), i) for i, m in matches.items() if m]
    if options.driven is not None or not found:
        return None
    quantity = options.quantity or "scattering"
    chosen = sorted(row for row in found if _PARAMETERS[row[0]] == quantity)
    others = {q: None for letter, *_ in found if (q := _PARAMETERS[letter]) != quantity}
    if not chosen:
        raise ArgumentError(f"quantity: the file holds no {quantity}; it holds {', '.join(others)}")
    channels = [Channel(f"port{out}", f"port{drive}") for _, out, drive, _ in chosen]
    if options.node is not None:
        count = max(max(out, drive) for _, out, drive, _ in chosen)
        channels = list(named_ports(channels, options.node, count))
    kept = list(range(len(chosen)))
    if options.select is not None:
        for name in options.select:
            if not any(name in (c.output, str(c)) for c in channels):
                listed = ", ".join(dict.fromkeys(c.output for c in channels))
                raise ArgumentError(f"select: no channel {name!r}; the file holds {listed}")
        kept = [k for k in kept if {channels[k].output, str(channels[k])} & set(options.select)]
    told = f"{quantity} parameters of the analysis taken"
    if others:
        told += f"; {' and '.join(others)} are there too, see quantity= (--quantity)"
    return Responses(
        tuple(chosen[k][3] for k in kept),
        tuple(channels[k] for k in kept),
        _PARAMETERS[chosen[0][0]],
        1.0,
        None,
        (told,),
    )


def _impedances(vectors: Sequence[Vector], node: int | None, options: ReadOptions) -> Responses:
    if node is None:
        raise _not_there("driven", str(options.driven), vectors, current=False)
    drive = vectors[node].name
    columns = _outputs(vectors, options, current=False)
    return Responses(
        columns,
        tuple(Channel(vectors[i].name, drive) for i in columns),
        "impedance",
        1.0,
        None,
        (f"node voltages taken as impedances: a 1 A AC source feeds {drive}",),
        driven_by_current=node,
    )


def _admittances(vectors: Sequence[Vector], source: int | None, options: ReadOptions) -> Responses:
    if source is None:
        raise _not_there("driven", str(options.driven), vectors, current=True)
    drive = vectors[source].name
    if drive[:1] not in "vV":
        raise ArgumentError(
            f"driven: i({drive}) is not the current of a voltage source; name the driven node, or "
            "the voltage source that drives the circuit"
        )
    columns = _outputs(vectors, options, current=True)
    return Responses(
        columns,
        tuple(Channel(vectors[i].name, drive) for i in columns),
        "admittance",
        -1.0,
        None,
        (
            f"source currents taken as admittances under 1 V AC at {drive}, with the sign turned: "
            "i(v) flows from + through the source, so the circuit draws -i(v)",
        ),
    )


def _transfers(
    vectors: Sequence[Vector], node: int | None, drive: str, options: ReadOptions
) -> Responses:
    """Take node voltages over that of `node`, else under a source of 1 V called `drive`."""
    columns = tuple(i for i in _outputs(vectors, options, current=False) if i != node)
    if not columns:
        besides = "" if node is None else f" besides v({drive})"
        raise FormatError(f"no node voltage{besides}", "save the voltage of the output")
    assumed = (
        f"transfer: node voltages divided by v({drive})"
        if node is not None
        else f"transfer: node voltages under a 1 V AC source {drive}"
        if options.driven
        else "transfer: node voltages under a 1 V AC source, which the file does not name"
    )
    channels = tuple(Channel(vectors[i].name, drive) for i in columns)
    return Responses(columns, channels, "transfer", 1.0, node, (assumed,))


def _source_name(
    vectors: Sequence[Vector], node: int | None, source: int | None, options: ReadOptions
) -> str:
    """Name what drives a transfer: a node, or a voltage source, saved or not."""
    at = node if node is not None else source
    if at is not None:
        return vectors[at].name
    name = _bare(str(options.driven), "i")
    # Voltage sources begin with a v; anything else is more likely a mistaken node.
    if not name.startswith("v") or name.startswith("v("):
        raise _not_there("driven", str(options.driven), vectors, current=False)
    return name


def _outputs(vectors: Sequence[Vector], options: ReadOptions, *, current: bool) -> tuple[int, ...]:
    """Find the vectors wanted; currents only of voltage sources unless selected."""
    if options.select is not None:
        found = []
        for name in options.select:
            index = _find(vectors, name, current=current)
            if index is None:
                raise _not_there("select", name, vectors, current=current)
            if index not in found:
                found.append(index)
        if not found:
            raise ArgumentError("select: names nothing; give at least one name or leave it out")
        return tuple(found)
    return tuple(
        i
        for i, vector in enumerate(vectors)
        if vector.current == current
        and (vector.name[:1] in "vV" if current else not _PARAMETER.fullmatch(vector.name))
    )


def _find(vectors: Sequence[Vector], name: str, *, current: bool) -> int | None:
    """Index of the vector called `name`, with or without v( ), i( ) or a leading slash."""
    wanted = _bare(name, "i" if current else "v")
    for same in (str.lower, lambda text: text.lower().removeprefix("/")):
        fitting = [i for i, v in enumerate(vectors) if v.current == current]
        index = next((i for i in fitting if same(vectors[i].name) == same(wanted)), None)
        if index is not None:
            return index
    return None


def _bare(name: str, letter: str) -> str:
    """Strip v( ) or i( ) off a name, in lower case."""
    plain = name.strip().lower()
    if plain.startswith(f"{letter}(") and plain.endswith(")"):
        plain = plain[2:-1].strip()
    return plain


def _not_there(
    option: str, name: str, vectors: Sequence[Vector], *, current: bool
) -> ArgumentError:
    what = "source current" if current else "node voltage"
    listed = ", ".join(v.name for v in vectors if v.current == current) or "none"
    return ArgumentError(
        f"{option}: the file holds no {what} called {name!r}; it holds {listed}"
        + ("" if option == "select" else f"; save the {what} of {name} too")
    )


def _listed(vectors: Sequence[Vector]) -> str:
    nodes = [v.name for v in vectors if not v.current]
    currents = [f"i({v.name})" for v in vectors if v.current]
    shown = [*(["nodes " + ", ".join(nodes)] if nodes else []), *currents]
    return ", ".join(shown)
