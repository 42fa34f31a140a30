"""The tidal constants of every deployment, as the fit that removed the short tides has them."""

from collections.abc import Sequence

import numpy as np

from massfit.constants import PASCAL_PER_HPA
from massfit.records.record import DailyRecord, TidalConstant

Row = dict[str, str | float | None]


def tidal_table(records: Sequence[DailyRecord]) -> list[Row]:
    """Tabulate the short tides of every deployment, one row a line.

    Parameters
    ----------
    records : sequence of DailyRecord

    Returns
    -------
    list of dict
        Amplitude and Greenwich lag with their standard errors, as seen over the record, and by the node of the Moon's
        orbit: amplitude / `nodal_factor` and lag + `nodal_angle_deg` are the constants of 18.6 years. These two are
        None where the modulation of the line follows no simple rule.

    Examples
    --------
    >>> constant = TidalConstant("S2", 2.0, 2500.0, np.pi / 3, 25.0, 1.0, 0.0)
    >>> days = np.array(["2016-01-01T12"], dtype="datetime64[ns]")
    >>> (row,) = tidal_table([DailyRecord("A", "A/1", days, np.zeros(1), days[0], tides=(constant,))])
    >>> row["line"], row["amplitude_hpa"], round(row["greenwich_lag_deg"])
    ('S2', 25.0, 60)
    """
    return [_row(record, constant) for record in records for constant in record.tides]


def _row(record: DailyRecord, constant: TidalConstant) -> Row:
    angle = constant.nodal_angle
    return {
        "site": record.site,
        "deployment": record.deployment,
        "line": constant.name,
        "cycles_per_day": round(constant.cycles_per_day, 8),
        "amplitude_hpa": constant.amplitude / PASCAL_PER_HPA,
        "amplitude_sd_hpa": constant.amplitude_sd / PASCAL_PER_HPA,
        "greenwich_lag_deg": float(np.degrees(constant.greenwich_lag)),
        "greenwich_lag_sd_deg": float(np.degrees(constant.lag_sd)),
        "nodal_factor": constant.nodal_factor,
        "nodal_angle_deg": None if angle is None else float(np.degrees(angle)),
    }
