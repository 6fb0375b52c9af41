"""Where responses are taken: channels between the nodes or ports of a circuit."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from polefit.errors import ArgumentError


@dataclass(frozen=True, order=True)
class Channel:
    """Where a response was taken: H = output / input.

    Parameters
    ----------
    output : str
        Name of the node or port observed.
    input : str
        Name of the node or port driven. Equal names mean a driving-point response.
    """

    output: str
    input: str

    @property
    def driving_point(self) -> bool:
        """Whether the response was observed where it was driven."""
        return self.output == self.input

    def __str__(self) -> str:
        return self.output if self.driving_point else f"{self.output} ← {self.input}"


def as_channel(name: str | tuple[str, str] | Channel) -> Channel:
    """Turn a node name (driving point) or an (output, input) pair into a Channel.

    Raises
    ------
    ArgumentError
        If `name` is neither, or a name is empty.
    """
    if isinstance(name, Channel):
        return name
    pair = (name, name) if isinstance(name, str) else name
    if not isinstance(pair, tuple | list) or len(pair) != 2:
        pair = ("", "")
    if not all(isinstance(part, str) and part.strip() for part in pair):
        raise ArgumentError(
            f"channels: {name!r} is not a channel; give a name or an (output, input) pair"
        )
    return Channel(pair[0].strip(), pair[1].strip())


def port_channels(names: Sequence[str]) -> tuple[Channel, ...]:
    """All n² channels between the ports `names`, row by row: (output, input)."""
    return tuple(Channel(output, drive) for output in names for drive in names)
