"""A line on standard error for work that takes more than two seconds."""

from __future__ import annotations

import sys
import threading
import time
from types import TracebackType

from polefit.cli.output import encodable

PATIENCE_S = 2.0
_REFRESH_S = 0.5
_WIDTH = 78


class Progress:
    """Shows the last message and the seconds gone, on a terminal only.

    Call it with a message at each step. A thread of its own refreshes the line, so that a
    long step is seen to be alive.

    Parameters
    ----------
    quiet : bool
        Show nothing.
    """

    def __init__(self, quiet: bool = False) -> None:
        self._shown = not quiet and sys.stderr is not None and sys.stderr.isatty()
        self._message = ""
        self._start = time.monotonic()
        self._done = threading.Event()
        self._thread = threading.Thread(target=self._refresh, daemon=True)

    def __call__(self, message: str) -> None:
        """Take the message to show next."""
        self._message = message

    def __enter__(self) -> Progress:
        if self._shown:
            self._thread.start()
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self._done.set()
        if self._thread.is_alive():
            self._thread.join()

    def _refresh(self) -> None:
        wait, drawn = PATIENCE_S, False
        while not self._done.wait(wait):
            wait, drawn = _REFRESH_S, True
            gone = time.monotonic() - self._start
            self._draw(f"{self._message or 'working'} … {gone:.0f} s")
        if drawn:
            self._draw("")

    def _draw(self, text: str) -> None:
        line = encodable(text, sys.stderr.encoding)[:_WIDTH]
        sys.stderr.write(f"\r{line:<{_WIDTH}}\r")
        sys.stderr.flush()
