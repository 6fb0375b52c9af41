"""polefit: stability verdicts for amplifiers from simulated frequency responses.

Heavy modules are imported when a name is first used, so that ``polefit --help`` is quick.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

__version__ = "0.1.0"

_HOME = {
    "ArgumentError": "polefit.errors",
    "Channel": "polefit.responses",
    "Confirmation": "polefit.confirmation",
    "DataError": "polefit.errors",
    "Estimate": "polefit.estimates",
    "FileError": "polefit.errors",
    "Identification": "polefit.modes",
    "NotSupportedError": "polefit.errors",
    "PolefitError": "polefit.errors",
    "ResponseSet": "polefit.responses",
    "confirm": "polefit.analysis.confirm",
    "identify": "polefit.analysis.identify",
    "read": "polefit.readers",
    "read_all": "polefit.readers",
    "write_hdf5": "polefit.readers.hdf5",
}
__all__ = [
    "ArgumentError",
    "Channel",
    "Confirmation",
    "DataError",
    "Estimate",
    "FileError",
    "Identification",
    "NotSupportedError",
    "PolefitError",
    "ResponseSet",
    "__version__",
    "confirm",
    "identify",
    "read",
    "read_all",
    "write_hdf5",
]

if TYPE_CHECKING:
    from polefit.analysis.confirm import confirm
    from polefit.analysis.identify import identify
    from polefit.confirmation import Confirmation
    from polefit.errors import (
        ArgumentError,
        DataError,
        FileError,
        NotSupportedError,
        PolefitError,
    )
    from polefit.estimates import Estimate
    from polefit.modes import Identification
    from polefit.readers import read, read_all
    from polefit.readers.hdf5 import write_hdf5
    from polefit.responses import Channel, ResponseSet


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module 'polefit' has no attribute {name!r}")
    value = getattr(importlib.import_module(_HOME[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
