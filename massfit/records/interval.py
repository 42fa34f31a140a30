"""Intervals between samples, as they are spoken of."""


def spoken_interval(seconds: float | None) -> str:
    """Name an interval of time in the largest unit that it fills.

    Parameters
    ----------
    seconds : float or None
        None where it is not known.

    Returns
    -------
    str

    Examples
    --------
    >>> spoken_interval(900.0), spoken_interval(86400.0), spoken_interval(5400.0), spoken_interval(None)
    ('15 min', '1 d', '1.5 h', '?')
    """
    if seconds is None:
        return "?"
    for unit, length in (("d", 86_400.0), ("h", 3_600.0), ("min", 60.0)):
        if seconds >= length:
            return f"{seconds / length:.4g} {unit}"
    return f"{seconds:.4g} s"
