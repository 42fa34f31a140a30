"""How wrong input is refused and Ctrl-C answered: in words, with an exit code, no traceback."""

import sys
from collections.abc import Iterator
from contextlib import contextmanager

import click

WRONG_INPUT = 2
NOT_TRUSTWORTHY = 3
INTERRUPTED = 130


@contextmanager
def refusing_politely() -> Iterator[None]:
    """Turn faults into one message and exit code 2, a failed iteration into 3, and Ctrl-C into 130."""
    from massfit.errors import ConvergenceError, InputError

    try:
        yield
    except InputError as error:
        count = len(error.faults)
        click.echo(f"massfit: {count} fault{'s' if count != 1 else ''} in the input; nothing was written.", err=True)
        for fault in error.faults:
            click.echo(_listed(str(fault)), err=True)
        sys.exit(WRONG_INPUT)
    except ConvergenceError as error:
        click.echo(f"massfit: {error} There is no answer; nothing was written.", err=True)
        sys.exit(NOT_TRUSTWORTHY)
    except KeyboardInterrupt:
        text = "massfit: interrupted. What estimate had finished is kept: the same command goes on from there."
        click.echo(text, err=True)
        sys.exit(INTERRUPTED)


def _listed(fault: str) -> str:
    """Break a fault into lines on a terminal, but never a path or name within; elsewhere it stays one line."""
    if not sys.stderr.isatty():
        return f"  - {fault}"
    import textwrap

    return textwrap.fill(
        fault, 80, initial_indent="  - ", subsequent_indent="    ", break_long_words=False, break_on_hyphens=False
    )
