"""What a run was made with."""

import platform
from importlib import metadata
from typing import Any

from massfit.network import Network

_LIBRARIES = (
    "numpy", "scipy", "xarray", "h5netcdf", "pyshtools", "ducc0", "celerite2", "emcee", "arviz-stats",
    "astropy-iers-data",
)  # fmt: skip


def provenance(network: Network) -> dict[str, Any]:
    """Versions, transform backend and seed of a run.

    Parameters
    ----------
    network : Network

    Returns
    -------
    dict
    """
    versions = {name: metadata.version(name) for name in _LIBRARIES}
    return {
        "massfit": metadata.version("massfit"),
        "python": platform.python_version(),
        "machine": f"{platform.system()} {platform.machine()}",
        "versions": versions,
        "transform_backend": f"ducc0 {versions['ducc0']}",
        "polar_motion": f"astropy-iers-data {versions['astropy-iers-data']}",
        "seed": network.settings.posterior.seed,
    }
