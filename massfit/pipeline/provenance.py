"""What a run was made with."""

import platform
from importlib import metadata
from typing import Any

from threadpoolctl import threadpool_info

from massfit.fingerprint.transforms import TRANSFORM_BACKEND
from massfit.network import Network
from massfit.results.stated_data import series_of_means, stated_data

_LIBRARIES = (
    "numpy", "scipy", "xarray", "h5netcdf", "pyshtools", "ducc0", "celerite2", "emcee", "arviz-stats",
    "astropy-iers-data", "matplotlib",
)  # fmt: skip


def provenance(network: Network, *, processes: int) -> dict[str, Any]:
    """Versions, transform backend, seed, processes and threads of a run.

    Parameters
    ----------
    network : Network
    processes : int
        That shared the work.

    Returns
    -------
    dict
        Besides, under `data`, what the network states of its data.
    """
    made = made_by(processes=processes)
    return {
        **made,
        "data": stated_data(network),
        "series_of_means": series_of_means(network),
        "transform_backend": TRANSFORM_BACKEND,
        "polar_motion": f"astropy-iers-data {made['versions']['astropy-iers-data']}",
        "seed": network.settings.posterior.seed,
    }


def made_by(*, processes: int) -> dict[str, Any]:
    """Versions, processes and threads of whatever is computed.

    Parameters
    ----------
    processes : int
        That shared the work.

    Returns
    -------
    dict
    """
    return {
        "massfit": metadata.version("massfit"),
        "python": platform.python_version(),
        "machine": f"{platform.system()} {platform.machine()}",
        "versions": {name: metadata.version(name) for name in _LIBRARIES},
        "processes": processes,
        "threads": [
            {"library": pool["internal_api"], "version": str(pool["version"]), "threads": pool["num_threads"]}
            for pool in threadpool_info()
        ],
    }
