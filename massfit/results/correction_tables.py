"""What each correction did to the phasors of the sites, as plain numbers and as variables of a Dataset."""

from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr

from massfit.constants import PASCAL_PER_HPA
from massfit.contracts import SITE_PHASORS
from massfit.corrections.phasors import CorrectionPhasor
from massfit.phasor import COMPONENTS
from massfit.results.estimate import SiteReduction

NEGLIGIBLE_PA = 1e-6
"""Amplitude below which a series counts as zero throughout: the pressure is rounded to as much."""


def correction_table(phasors: Sequence[CorrectionPhasor]) -> list[dict[str, Any]]:
    """Tabulate the phasors of the series of one site.

    Parameters
    ----------
    phasors : sequence of CorrectionPhasor

    Returns
    -------
    list of dict
        `series`, `model` (None but for the circulation; "mean" for the mean of the models present), `phasor_hpa`
        [in phase, quadrature], and `summand`: the site's own phasor and the summands make up the "record". Series
        that are zero throughout are left out.

    Examples
    --------
    >>> correction_table([CorrectionPhasor("pole_tide", None, np.array([30.0, -10.0]))])
    [{'series': 'pole_tide', 'model': None, 'phasor_hpa': [0.3, -0.1], 'summand': True}]
    """
    return [
        {
            "series": each.series,
            "model": each.model,
            "phasor_hpa": (each.phasor / PASCAL_PER_HPA).tolist(),
            "summand": each.summand,
        }
        for each in phasors
        if np.hypot(*each.phasor) > NEGLIGIBLE_PA
    ]


def with_corrections(phasors: xr.Dataset, reductions: Sequence[SiteReduction]) -> xr.Dataset:
    """Add the phasor of every correction to the phasors of the sites.

    Parameters
    ----------
    phasors : xarray.Dataset
        contracts.SITE_PHASORS.
    reductions : sequence of SiteReduction
        Of those sites that have records.

    Returns
    -------
    xarray.Dataset
        With `correction_phasor` (site, correction, component) and `summand` (correction); NaN where a site does not
        have a series. The same Dataset where no site has records.
    """
    found = {reduction.site.id: {each.label: each for each in reduction.phasors} for reduction in reductions}
    known = {label: each for own in found.values() for label, each in own.items()}
    if not known:
        return phasors
    # a site without one model leaves a gap; the order is that of the fullest site
    fullest = max(found.values(), key=len)
    labels = [*fullest, *(label for label in known if label not in fullest)]
    values = np.full((phasors.sizes["site"], len(labels), len(COMPONENTS)), np.nan)
    for place, site in enumerate(phasors["site"].values):
        for column, label in enumerate(labels):
            if label in found.get(site, {}):
                values[place, column] = found[site][label].phasor
    declared = SITE_PHASORS.optional
    summands = np.array([known[label].summand for label in labels], dtype=np.int8)
    return phasors.assign(
        {
            "correction_phasor": (
                declared["correction_phasor"].dims,
                values,
                {"units": declared["correction_phasor"].units, "long_name": "annual phasor of a series of the site"},
            ),
            "summand": (
                declared["summand"].dims,
                summands,
                {"units": "1", "long_name": "1 where the record is the site's phasor plus this and the other summands"},
            ),
        }
    ).assign_coords(correction=np.array(labels, dtype=object))
