"""The command line: one thin file per command, and the one place where errors become a status.

Exit status: 0 nothing unstable, 1 something unstable, 3 undecided, 2 bad input or usage (with
one line on standard error), 130 interrupted. Results go to standard output, all else to
standard error.
"""

from __future__ import annotations

import os
import sys
import warnings
from collections.abc import Sequence
from typing import NoReturn

import click

from polefit import __version__
from polefit.cli.confirm import confirm
from polefit.cli.demo import demo
from polefit.cli.identify import identify
from polefit.cli.inspect import inspect
from polefit.cli.options import on_command_line
from polefit.cli.output import say
from polefit.errors import PolefitError, one_line

DEBUG = "POLEFIT_DEBUG"
BAD_INPUT = 2
INTERRUPTED = 130


@click.group(
    name="polefit",
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
    epilog="Exit status: 0 nothing unstable, 1 something unstable, 3 undecided, 2 bad input.",
)
@click.version_option(__version__, message="polefit %(version)s")
def commands() -> None:
    """Tell from simulated frequency responses whether a circuit is stable.

    The natural modes are found with their frequency, damping ratio, growth rate and
    uncertainties, and the nodes at which they show.
    """


for _command in (inspect, identify, confirm, demo):
    commands.add_command(_command)


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    argv : sequence of str, optional
        Arguments without the program's name; by default those of the process.

    Returns
    -------
    int
        The exit status.
    """
    with warnings.catch_warnings():
        if not sys.warnoptions:
            warnings.simplefilter("ignore")
        try:
            status = commands.main(
                args=None if argv is None else list(argv),
                prog_name="polefit",
                standalone_mode=False,
            )
        except click.exceptions.NoArgsIsHelpError as error:
            sys.stderr.write(error.format_message() + "\n")
            return BAD_INPUT
        except click.ClickException as error:
            return _refused(_usage_text(error))
        except (click.Abort, KeyboardInterrupt):
            say("interrupted")
            return INTERRUPTED
        except PolefitError as error:
            return _refused(on_command_line(str(error)))
        except MemoryError:
            return _refused("not enough memory; read fewer channels (--select) or a smaller band")
        except OSError as error:
            return _refused(f"{error.filename or 'system'}: {error.strerror or error}")
        except Exception as error:
            # Python would end with status 1, which scripts read as "unstable"
            if os.environ.get(DEBUG):
                raise
            what = f"{type(error).__name__}: {error}"
            return _refused(f"fault in polefit, please report it: {what}; {DEBUG}=1 shows more")
    return int(status or 0)


def run() -> NoReturn:
    """Run the command of this process and end it with its status."""
    sys.exit(main())


def _refused(text: str) -> int:
    say(f"error: {one_line(text)}")
    return BAD_INPUT


def _usage_text(error: click.ClickException) -> str:
    """Return click's message, with the command whose help would say more."""
    text = error.format_message()
    if isinstance(error, click.UsageError) and error.ctx is not None:
        return f"{text.rstrip('.')}; see {error.ctx.command_path} --help"
    return text
