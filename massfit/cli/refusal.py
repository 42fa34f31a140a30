"""How wrong input is refused: every fault at once, exit code 2, no traceback."""

import sys
from collections.abc import Iterator
from contextlib import contextmanager

import click

WRONG_INPUT = 2


@contextmanager
def refusing_politely() -> Iterator[None]:
    """Turn an InputError into one message with all its faults and exit code 2."""
    from massfit.errors import InputError

    try:
        yield
    except InputError as error:
        count = len(error.faults)
        click.echo(f"massfit: {count} fault{'s' if count != 1 else ''} in the input; nothing was written.", err=True)
        for fault in error.faults:
            click.echo(f"  - {fault}", err=True)
        sys.exit(WRONG_INPUT)
