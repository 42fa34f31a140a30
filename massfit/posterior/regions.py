"""Scalar summaries and two-dimensional regions of draws."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.interpolate import RegularGridInterpolator
from scipy.ndimage import gaussian_filter

PROBABILITIES = (0.5, 0.95)
"""Probabilities of the regions that are reported."""


@dataclass(frozen=True)
class DensityRegions:
    """Density of draws on a grid, with the level that bounds each highest-density region.

    Parameters
    ----------
    in_phase, quadrature : (n,) array
        Grid, in the unit of the draws.
    density : (n, n) array
        Per unit area; rows follow `quadrature`, columns `in_phase`.
    levels : dict of float to float
        Density at the edge of the region of each probability.
    """

    in_phase: NDArray[np.float64]
    quadrature: NDArray[np.float64]
    density: NDArray[np.float64]
    levels: dict[float, float]


def density_regions(
    draws: NDArray[np.float64],
    probabilities: tuple[float, ...] = PROBABILITIES,
    *,
    grid_size: int = 128,
    bandwidth: float | None = None,
) -> DensityRegions:
    """Two-dimensional highest-density regions of draws.

    Parameters
    ----------
    draws : (n, 2) array
        In phase and quadrature, any unit.
    probabilities : tuple of float
    grid_size : int
        Cells along each side.
    bandwidth : float, optional
        Standard deviation of the kernel in standard deviations of the draws; by default that of the normal
        reference. A wider one gives smoother edges, blurs what is narrower, and leaves the probability as it is.

    Returns
    -------
    DensityRegions
        Contour `density` at `levels` to draw the regions.

    Notes
    -----
    A kernel density with the normal-reference bandwidth (Scott 1992), binned; the level
    of a region is the quantile of the density at the draws (Hyndman 1996, The American
    Statistician 50, 120-126), so that each region holds its probability of draws.

    Examples
    --------
    >>> draws = np.random.default_rng(1).standard_normal((20000, 2))
    >>> levels = density_regions(draws).levels
    >>> bool(abs(levels[0.5] * 2 * np.pi - 0.5) < 0.03)
    True
    """
    values = np.asarray(draws, dtype=float)
    centre, sd = values.mean(axis=0), values.std(axis=0)
    # turned to uncorrelated axes of unit width, so that one round kernel suits
    root = np.linalg.cholesky(np.cov(values.T))
    edge = 6.0
    edges = np.linspace(-edge, edge, grid_size + 1)
    middles = 0.5 * (edges[1:] + edges[:-1])
    turned = np.linalg.solve(root, (values - centre).T).T
    counts, _, _ = np.histogram2d(turned[:, 0], turned[:, 1], bins=[edges, edges])
    width = len(values) ** (-1.0 / 6.0) if bandwidth is None else bandwidth
    step = edges[1] - edges[0]
    smooth = gaussian_filter(counts, width / step, mode="constant") / (len(values) * step**2)
    evaluate = RegularGridInterpolator((middles, middles), smooth, bounds_error=False, fill_value=0.0)
    jacobian = np.linalg.det(root)
    at_draws = evaluate(turned) / jacobian
    reach = np.minimum(np.abs(values - centre).max(axis=0), 5.0 * sd) * 1.05
    x, y = (np.linspace(c - r, c + r, grid_size) for c, r in zip(centre, reach, strict=True))
    points = np.stack(np.meshgrid(x, y), axis=-1) - centre
    density = evaluate(np.linalg.solve(root, points.reshape(-1, 2).T).T).reshape(grid_size, grid_size) / jacobian
    return DensityRegions(x, y, density, {p: float(np.quantile(at_draws, 1.0 - p)) for p in probabilities})


def scalar_summary(draws: NDArray[np.float64]) -> dict[str, float | list[float]]:
    """Median, mean, standard deviation and equal-tailed regions of draws (n,).

    Examples
    --------
    >>> scalar_summary(np.arange(101.0))["region50"]
    [25.0, 75.0]
    """
    low95, low50, median, high50, high95 = np.quantile(draws, [0.025, 0.25, 0.5, 0.75, 0.975]).tolist()
    return {
        "median": median,
        "mean": float(np.mean(draws)),
        "sd": float(np.std(draws, ddof=1)),
        "region50": [low50, high50],
        "region95": [low95, high95],
    }
