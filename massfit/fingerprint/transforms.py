"""Spherical harmonic transforms on a Gauss-Legendre grid.

Coefficients of a real field are complex a_nm of orthonormal harmonics with the
Condon-Shortley phase, kept for m >= 0 only and ordered m first: all degrees of
m = 0, then of m = 1, and so on. :func:`as_cilm` turns them into the real
4-pi-normalised C_nm and S_nm of geodesy.
"""

import os
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import ducc0
import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.fft import next_fast_len

from massfit.fingerprint.grid import CellGrid
from massfit.fingerprint.threads import heed_thread_counts

heed_thread_counts(os.environ)  # before the first transform, which reads them once

TRANSFORM_BACKEND = f"ducc0 {ducc0.__version__}"
"""The library that transforms, for the record of a run."""


@dataclass(frozen=True, eq=False)
class SphereGrid:
    """Gauss-Legendre grid that integrates products of three factors exactly.

    A field of degree N times an ocean function times a harmonic of degree N sees
    the ocean function up to degree 2 N only; the grid integrates that product
    exactly. The Gauss weights are the heights (in the sine of latitude) of bands
    that hold their nodes, so averages over these bands keep every integral.

    Parameters
    ----------
    max_degree : int
        Highest degree N of the coefficients.
    threads : int
        Threads of the transforms; the numbers do not depend on it.

    Examples
    --------
    >>> SphereGrid(180).cells.shape
    (362, 729)
    """

    max_degree: int
    threads: int = 1

    @cached_property
    def latitude_deg(self) -> NDArray[np.float64]:
        """Latitudes of the rows from south to north, (n_lat,) degrees north."""
        return np.asarray(np.degrees(ducc0.misc.GL_thetas(2 * self.max_degree + 2)) - 90.0)

    @cached_property
    def longitude_deg(self) -> NDArray[np.float64]:
        """Longitudes of the columns, (n_lon,) degrees east."""
        n_lon = int(next_fast_len(4 * self.max_degree + 1, real=True))
        return np.asarray((np.arange(n_lon) + 0.5) * (360.0 / n_lon), dtype=float)

    @cached_property
    def cells(self) -> CellGrid:
        """The cell that each node stands for."""
        edges = np.cumsum(ducc0.misc.GL_weights(self.latitude_deg.size, 1)) / (2.0 * np.pi) - 1.0
        bounds = np.degrees(np.arcsin(edges[:-1]))
        longitude_bounds = np.linspace(0.0, 360.0, self.longitude_deg.size + 1)
        return CellGrid(np.concatenate([[-90.0], bounds, [90.0]]), longitude_bounds)

    @cached_property
    def solid_angle(self) -> NDArray[np.float64]:
        """Quadrature weight of one node in each row, (n_lat,) sr."""
        return np.asarray(ducc0.misc.GL_weights(self.latitude_deg.size, self.longitude_deg.size))

    @cached_property
    def degree(self) -> NDArray[np.intp]:
        """Degree n of each coefficient, (n_coefficient,)."""
        return np.concatenate([np.arange(m, self.max_degree + 1) for m in range(self.max_degree + 1)])

    @cached_property
    def multiplicity(self) -> NDArray[np.float64]:
        """How often each coefficient counts in an inner product: 1 for m = 0, otherwise 2."""
        return np.where(np.arange(self.degree.size) <= self.max_degree, 1.0, 2.0)

    def synthesise(self, coefficients: NDArray[np.complex128]) -> NDArray[np.float64]:
        """Evaluate fields on the grid.

        Parameters
        ----------
        coefficients : (n_field, n_coefficient) array of complex

        Returns
        -------
        (n_field, n_lat, n_lon) array
        """
        fields = ducc0.sht.synthesis(alm=coefficients[:, None], spin=0, **self._rings)
        return np.asarray(fields).reshape(-1, *self.cells.shape)

    def analyse(self, fields: NDArray[np.float64]) -> NDArray[np.complex128]:
        """Coefficients of fields given on the grid, by quadrature.

        Parameters
        ----------
        fields : (n_field, n_lat, n_lon) array

        Returns
        -------
        (n_field, n_coefficient) array of complex
        """
        pixels = np.ascontiguousarray(fields, dtype=float).reshape(len(fields), 1, -1)
        ringed = ducc0.sht.adjoint_synthesis(map=pixels, spin=0, ringfactor=self.solid_angle, **self._rings)
        return np.asarray(ringed)[:, 0]

    def synthesise_at(
        self, coefficients: NDArray[np.complex128], latitude_deg: ArrayLike, longitude_deg: ArrayLike
    ) -> NDArray[np.float64]:
        """Evaluate fields at points, by the sum over all harmonics.

        Parameters
        ----------
        coefficients : (n_field, n_coefficient) array of complex
        latitude_deg, longitude_deg : (n_point,) array_like

        Returns
        -------
        (n_field, n_point) array
        """
        fields = ducc0.sht.synthesis(alm=coefficients[:, None], spin=0, **self._points(latitude_deg, longitude_deg))
        return np.asarray(fields)[:, 0]

    def synthesise_regular(
        self,
        coefficients: NDArray[np.complex128],
        latitude_deg: NDArray[np.float64],
        longitude_deg: NDArray[np.float64],
    ) -> NDArray[np.float64]:
        """Evaluate fields on a regular grid of another spacing, by the sum over all harmonics.

        Parameters
        ----------
        coefficients : (n_field, n_coefficient) array of complex
        latitude_deg : (n_lat,) array
            Any latitudes, degrees north.
        longitude_deg : (n_lon,) array
            Once around eastward, equally spaced, degrees east.

        Returns
        -------
        (n_field, n_lat, n_lon) array
        """
        size = longitude_deg.size
        start = np.full(latitude_deg.size, np.radians(longitude_deg[0]))
        rings = self._layout(np.radians(90.0 - latitude_deg), start, size)
        fields = ducc0.sht.synthesis(alm=coefficients[:, None], spin=0, **rings)
        return np.asarray(fields).reshape(-1, latitude_deg.size, size)

    def harmonics_at(self, latitude_deg: ArrayLike, longitude_deg: ArrayLike) -> NDArray[np.complex128]:
        """Coefficients of the unit masses at points: the harmonics there, conjugated.

        The inner product of a field with row i is the value of the field at point i.

        Parameters
        ----------
        latitude_deg, longitude_deg : (n_point,) array_like

        Returns
        -------
        (n_point, n_coefficient) array of complex
        """
        points = self._points(latitude_deg, longitude_deg)
        each = np.eye(len(points["theta"]))[:, None]
        return np.asarray(ducc0.sht.adjoint_synthesis(map=each, spin=0, **points))[:, 0]

    @cached_property
    def _rings(self) -> dict[str, Any]:
        n_lat, n_lon = self.cells.shape
        colatitude = np.radians(90.0 - self.latitude_deg)
        return self._layout(colatitude, np.full(n_lat, np.radians(self.longitude_deg[0])), n_lon)

    def _points(self, latitude_deg: ArrayLike, longitude_deg: ArrayLike) -> dict[str, Any]:
        """Points as rings of one pixel each: exact, and fast enough for thousands."""
        latitude, longitude = np.atleast_1d(latitude_deg, longitude_deg)
        return self._layout(np.radians(90.0 - latitude), np.radians(longitude), 1)

    def _layout(self, colatitude: NDArray[np.float64], first: NDArray[np.float64], size: int) -> dict[str, Any]:
        return {
            "theta": colatitude,
            "phi0": first,
            "nphi": np.full(colatitude.size, size, dtype=np.uint64),
            "ringstart": np.arange(colatitude.size, dtype=np.uint64) * size,
            "lmax": self.max_degree,
            "nthreads": self.threads,
        }


def as_cilm(coefficients: NDArray[np.complex128], max_degree: int) -> NDArray[np.float64]:
    """Real 4-pi-normalised coefficients without the Condon-Shortley phase.

    Parameters
    ----------
    coefficients : (..., n_coefficient) array of complex
        As in this module.
    max_degree : int
        Their highest degree.

    Returns
    -------
    (..., 2, max_degree + 1, max_degree + 1) array
        C_nm at [0, n, m] and S_nm at [1, n, m], the layout of pyshtools.

    Examples
    --------
    >>> one = np.zeros(6, dtype=complex)
    >>> one[0] = np.sqrt(4 * np.pi)  # the constant 1
    >>> as_cilm(one, 2)[0, 0].round(12)
    array([1., 0., 0.])
    """
    order, degree = np.triu_indices(max_degree + 1)
    factor = np.where(order == 0, 1.0, np.sqrt(2.0) * (-1.0) ** order) / np.sqrt(4.0 * np.pi)
    cilm = np.zeros((*coefficients.shape[:-1], 2, max_degree + 1, max_degree + 1))
    cilm[..., 0, degree, order] = factor * coefficients.real
    cilm[..., 1, degree, order] = -factor * coefficients.imag
    return cilm
