"""The command line: a thin skin over the package.

Every command has ``--json`` (one JSON value on standard output and nothing else) and ``--catalog``.
Exit codes: 0 done; 1 carried out, but the answer is no (no orbit, another one than asked for, not
verified, a row that failed); 2 the request cannot be carried out, with one line that says why; 130
stopped by Ctrl-C.
"""

from __future__ import annotations

import signal
from collections.abc import Sequence

from orbitsearch.cli.parser import make_parser
from orbitsearch.cli.report import any_letter, complain
from orbitsearch.errors import OrbitsearchError

__all__ = ["main"]

BAD_REQUEST = 2
STOPPED = 130


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Parameters
    ----------
    arguments : sequence of str, optional
        By default those of the process.

    Returns
    -------
    int
        Exit code.
    """
    any_letter()
    options = make_parser().parse_args(arguments)
    before = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        return int(options.run(options))
    except OrbitsearchError as problem:
        complain(_typed(str(problem)))
        return BAD_REQUEST
    except KeyboardInterrupt:
        complain("stopped")
        return STOPPED
    finally:
        # A program of its own ends now, which takes a moment in which Ctrl-C could only kill it.
        # Called with arguments, inside of another program, it leaves signals as they were.
        if arguments is not None:
            for number, handler in before.items():
                if signal.getsignal(number) is not handler:
                    signal.signal(number, handler)


def _typed(message: str) -> str:
    """The message with arguments named as they are typed, not as Python names them."""
    for name in ("word", "braid", "symmetry", "max_scaled_period"):
        message = message.replace(f"`{name}`", f"`--{name.replace('_', '-')}`")
    return message.replace("`path`", "`--catalog`")
