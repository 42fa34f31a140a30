"""How many threads the environment asks of the transforms."""

from collections.abc import MutableMapping

_OWN, _COMMON = "DUCC0_NUM_THREADS", "OMP_NUM_THREADS"
_ALL = "0"


def heed_thread_counts(environment: MutableMapping[str, str]) -> None:
    """Put the number of threads in words that the library of the transforms reads.

    It takes a whole number and fails on all else. OpenMP takes a list too, one number for each level, and leaves
    open what other text means (OpenMP 5.2, environment variables). Here an empty value and such text are no wish at
    all, and of a list the first number counts.

    Parameters
    ----------
    environment : mutable mapping of str to str
        Changed only where the library would fail.

    Examples
    --------
    >>> environment = {"OMP_NUM_THREADS": "4,2"}
    >>> heed_thread_counts(environment)
    >>> environment["DUCC0_NUM_THREADS"]
    '4'
    """
    own, common = environment.get(_OWN), environment.get(_COMMON)
    first = ((own or "").strip() or (common or "")).split(",")[0].strip()
    number = first if first.isascii() and first.isdigit() else _ALL
    read = common if own is None else own
    if read is not None and read != number:
        environment[_OWN] = number
