"""A place on the sea floor, and the intervals its analyst left out."""

from dataclasses import dataclass

import numpy as np

LEAST_NETWORK_DAYS = 180
"""Least number of days with data that a network needs in all."""

LEAST_SITE_DAYS = 90
"""Distinct days a site must have. Recorders serve periods of about a year or less (common practice): with a
quarter of it, level, drift and two harmonics are still solvable, and the sigma says how badly."""


@dataclass(frozen=True)
class Interval:
    """A stretch of time that is not used, both ends included.

    Parameters
    ----------
    start, end : numpy.datetime64
        First and last instant, UTC.
    reason : str
        Why; repeated in every output.
    """

    start: np.datetime64
    end: np.datetime64
    reason: str


@dataclass(frozen=True)
class Site:
    """A place on the sea floor with one or more deployments.

    Parameters
    ----------
    id : str
        Name, unique in the network.
    latitude_deg, longitude_deg : float
        Degrees north and degrees east, either convention.
    depth_m : float, optional
        Water depth, m.
    group : str, optional
        Free label: basin, operator or instrument type.
    exclude : tuple of Interval
        Intervals not used.
    excluded_because : str, optional
        When given the whole site is left out, for this reason.
    reference : str
        Whose records these are and how they are cited; empty where it is not stated.

    Examples
    --------
    >>> storm = Interval(np.datetime64("2016-03-01"), np.datetime64("2016-03-20"), "dragged by a trawl")
    >>> site = Site("A3", latitude_deg=-11.25, longitude_deg=205.5, depth_m=4870.0, exclude=(storm,))
    >>> site.exclude[0].reason
    'dragged by a trawl'
    """

    id: str
    latitude_deg: float
    longitude_deg: float
    depth_m: float | None = None
    group: str | None = None
    exclude: tuple[Interval, ...] = ()
    excluded_because: str | None = None
    reference: str = ""
