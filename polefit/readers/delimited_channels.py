"""Names and quantity of the responses of a text table."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import cast

from polefit.errors import ArgumentError, FormatError
from polefit.readers.delimited_headings import Heading
from polefit.readers.driven import Responses, Vector, responses_of
from polefit.readers.reading import REFERENCE_UNKNOWN, OpenQuestionError, ReadOptions, named_ports
from polefit.responses import QUANTITIES, Channel, Quantity


@dataclass(frozen=True)
class Meaning:
    """What the traces of a table are.

    Parameters
    ----------
    responses : Responses
        Columns, channels, quantity.
    reference_ohm : tuple of float or None
        Reference resistances of scattering data.
    warnings : tuple of str
        What deserves a second look.
    """

    responses: Responses
    reference_ohm: tuple[float, ...] | None = None
    warnings: tuple[str, ...] = ()


def meaning(labels: Sequence[Heading], options: ReadOptions, stem: str) -> Meaning:
    """Name the responses and settle their quantity.

    Parameters
    ----------
    labels : sequence of Heading
        One for each trace.
    options : ReadOptions
        `quantity`, `driven`, `select`, `node` and `reference_ohm` are used.
    stem : str
        Stem of the file name, which names the node of a file with one response.

    Returns
    -------
    Meaning

    Raises
    ------
    AmbiguousFileError
        If the quantity or the driven node is open.
    ArgumentError, FormatError
        If an option does not fit the file, or two columns have one name.
    """
    if options.quantity is not None and options.quantity not in QUANTITIES:
        raise ArgumentError(
            f"quantity: {options.quantity!r} is not known; use one of {', '.join(QUANTITIES)}"
        )
    if options.node is not None and len(labels) > 1 and not _by_ports(labels):
        raise ArgumentError(f"node: the file holds {len(labels)} responses; use select instead")
    raw = [label.kind in ("voltage", "current") for label in labels]
    if options.driven is not None and len(labels) == 1 and not labels[0].output:
        name = options.node or options.driven
        channel = Channel(name, options.driven)
        said = [f"one response without a name: taken at {name}, driven at {options.driven}"]
        if options.quantity is None and not labels[0].kind:
            options = replace(options, quantity="impedance")
            said.append("taken as an impedance: the response to a 1 A AC source")
        quantity, columns = _quantity(labels, options)
        return Meaning(_plain([channel], quantity, columns, tuple(said)))
    if options.driven is not None:
        return Meaning(_driven(labels, options))
    settled = options.quantity not in (None, "transfer")
    if settled and len(labels) == 1 and labels[0].kind == "voltage":
        name = options.node or labels[0].output or stem
        assumed = f"one voltage: taken where the circuit is driven, at {name}"
        return Meaning(_plain([Channel(name, name)], str(options.quantity), [0], (assumed,)))
    if any(raw):
        return Meaning(responses_of(_vectors(labels), options))
    quantity, columns = _quantity(labels, options)
    channels, assumptions = _channels([labels[i] for i in columns], options, stem)
    _refuse_repeats(channels)
    if options.select is not None and options.quantity in (None, quantity):
        # Where a matrix is to be converted first, the selection must wait.
        chosen = selected(channels, options.select)
        columns, channels = [columns[i] for i in chosen], [channels[i] for i in chosen]
    reference, warnings = _reference(quantity, channels, options)
    return Meaning(_plain(channels, quantity, columns, assumptions), reference, warnings)


def _plain(
    channels: Sequence[Channel], quantity: str, columns: Sequence[int], assumed: tuple[str, ...]
) -> Responses:
    return Responses(tuple(columns), tuple(channels), cast(Quantity, quantity), 1.0, None, assumed)


def _vectors(labels: Sequence[Heading]) -> list[Vector]:
    vectors = [Vector(label.output, label.kind == "current") for label in labels]
    if len(set(vectors)) < len(vectors):
        twice = next(v.name for v in vectors if vectors.count(v) > 1)
        raise FormatError(f"two columns are named {twice!r}", "give each column its own name")
    return vectors


def _driven(labels: Sequence[Heading], options: ReadOptions) -> Responses:
    """Responses under one source, at the node that the user names."""
    if any(label.input for label in labels):
        raise ArgumentError("driven: the headings name the driven port already; leave it out")
    kinds = {label.kind for label in labels}
    if not all(label.output for label in labels):
        raise ArgumentError(
            "driven: the columns carry no node names; name them in the first line of the file"
        )
    if kinds & {"scattering", "admittance"}:
        raise ArgumentError(
            f"driven: has no meaning for {', '.join(sorted(kinds - {''}))} data; leave it out"
        )
    return responses_of(_vectors(labels), options)


def _quantity(labels: Sequence[Heading], options: ReadOptions) -> tuple[str, list[int]]:
    """Quantity, and which traces have it."""
    kinds = list(dict.fromkeys(label.kind for label in labels if label.kind))
    everything = list(range(len(labels)))
    if not kinds:
        if options.quantity is None:
            raise OpenQuestionError(
                "nothing says whether the numbers are impedances, admittances, scattering "
                "parameters or a transfer ratio",
                "say quantity= (--quantity)",
                option="quantity",
                presume={"quantity": "transfer"},
            )
        return options.quantity, everything
    if len(kinds) == 1 and all(label.kind for label in labels):
        return kinds[0], everything
    if options.quantity is None:
        said = " and ".join(kinds) + ("" if all(x.kind for x in labels) else " and unnamed")
        raise OpenQuestionError(
            f"the columns hold {said} data",
            "say quantity= (--quantity) to take one of them",
            option="quantity",
            presume={"quantity": kinds[0]},
        )
    of_it = [i for i, label in enumerate(labels) if label.kind in (options.quantity, "")]
    if not of_it:
        raise ArgumentError(
            f"quantity: the file holds no {options.quantity}; it holds {', '.join(kinds)}"
        )
    return options.quantity, of_it


def _channels(
    labels: Sequence[Heading], options: ReadOptions, stem: str
) -> tuple[list[Channel], tuple[str, ...]]:
    if len(labels) == 1:
        return _one_channel(labels[0], options, stem)
    assumptions = []
    if any(not label.output for label in labels):
        assumptions.append(
            f"responses without a name are called {stem}_1, {stem}_2, …; nothing says where they "
            "were driven, so none of them counts as a driving-point response"
        )
    if any(label.output and not label.input for label in labels):
        assumptions.append(
            "each named response is taken as observed where it is driven; if one node was driven "
            "for all, name it with driven= (--driven)"
        )
    channels = [
        Channel(label.output, label.input or label.output)
        if label.output
        else Channel(f"{stem}_{i + 1}", stem)
        for i, label in enumerate(labels)
    ]
    if options.node is not None:
        count = len({name for c in channels for name in (c.output, c.input)})
        return list(named_ports(channels, options.node, count)), ()
    return channels, tuple(assumptions)


def _by_ports(labels: Sequence[Heading]) -> bool:
    """Whether the headings count ports, as S21 does, beginning with 1."""
    names = {name for label in labels for name in (label.output, label.input)}
    return names == {f"port{i}" for i in range(1, len(names) + 1)}


def _one_channel(
    label: Heading, options: ReadOptions, stem: str
) -> tuple[list[Channel], tuple[str, ...]]:
    """Name the only response: by the option, else by its heading, else by the file."""
    if label.input and label.input != label.output:
        return [Channel(label.output, label.input)], ()
    own = "" if label.input and label.output.startswith("port") else label.output
    name = options.node or own or stem
    source = "" if options.node or own else ", named by the file"
    assumed = () if label.input else (f"one response: taken as driven at {name}{source}",)
    return [Channel(name, name)], assumed


def _refuse_repeats(channels: Sequence[Channel]) -> None:
    if len(set(channels)) < len(channels):
        twice = next(c for c in channels if list(channels).count(c) > 1)
        raise FormatError(f"two responses are named {twice}", "give each column its own name")


def selected(channels: Sequence[Channel], names: Sequence[str]) -> list[int]:
    """Find the channels whose output (or whole name) is one of `names`.

    Raises
    ------
    ArgumentError
        If a name fits no channel.
    """
    found: list[int] = []
    for name in names:
        fitting = [i for i, c in enumerate(channels) if name in (c.output, str(c))]
        if not fitting:
            listed = ", ".join(dict.fromkeys(c.output for c in channels))
            raise ArgumentError(f"select: no channel {name!r}; the file holds {listed}")
        found += [i for i in fitting if i not in found]
    if not found:
        raise ArgumentError("select: names nothing; give at least one name or leave it out")
    return found


def _reference(
    quantity: str, channels: Sequence[Channel], options: ReadOptions
) -> tuple[tuple[float, ...] | None, tuple[str, ...]]:
    if quantity != "scattering":
        if options.reference_ohm is not None:
            raise ArgumentError("reference_ohm: has no meaning for these data; leave it out")
        return None, ()
    if options.reference_ohm is None:
        return None, (REFERENCE_UNKNOWN,)
    ports = {name for c in channels for name in (c.output, c.input)}
    return (float(options.reference_ohm),) * len(ports), ()
