"""Where the sea floor is quiet: from the bottom pressure of ocean models to one map."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
import xarray as xr
from threadpoolctl import threadpool_limits

from massfit.constants import PASCAL_PER_HPA, TROPICAL_YEAR_DAYS
from massfit.contracts import QUIETNESS_MAP, require
from massfit.corrections.atmosphere import annual_phasor
from massfit.corrections.circulation import OCEAN_MEAN_LIMIT_HPA, WHOLE_OCEAN_SHARE
from massfit.errors import Fault, InputError, collect
from massfit.fingerprint.ocean import OceanFunction
from massfit.network import Series
from massfit.pipeline.executor import Embedded, Executor
from massfit.pipeline.progress import Progress, ignore
from massfit.screening.accumulate import Part, mean_sums, part_sums
from massfit.screening.design import Design, make_design
from massfit.screening.ensemble import INFLATION_FACTOR, QUIET_SD_PA, quietness_map
from massfit.screening.field import BlockSource, FirstLook, ModelField, first_look
from massfit.screening.finish import LEAST_COVERAGE, CellNumbers, cell_numbers, joined_cells
from massfit.screening.grid import ScreenGrid, cell_weights, require_land_mask, same_grid, screen_grid
from massfit.screening.line_noise import attenuation, line_noise
from massfit.screening.plan import DEFAULT_MEMORY_GB, Plan, make_plan
from massfit.screening.sums import Floats, Sums, add_sums
from massfit.screening.times import TimeAxis, time_axis

Result = TypeVar("Result")

RECORD_YEARS = (1.0, 2.0, 4.0, 8.0)
"""Lengths of records for which the noise at the annual line is given unless others are stated."""

_LARGEST_SD, _SMALLEST_SD = 1e4, 1.0
"""Pa, at the median cell: the deep ocean varies by a few hPa; a hundred, or a hundredth, is a wrong unit."""


@dataclass(frozen=True, eq=False)
class _Job:
    """One field with all that its parts need."""

    field: ModelField
    source: BlockSource
    axis: TimeAxis
    grid: ScreenGrid
    weights: Floats
    look: FirstLook
    design: Design
    plan: Plan


def screen_sea_floor(
    fields: Sequence[ModelField],
    *,
    record_years: Sequence[float] = RECORD_YEARS,
    reference_year: int | None = None,
    inflation_factor: float = INFLATION_FACTOR,
    quiet_sd_hpa: float = QUIET_SD_PA / PASCAL_PER_HPA,
    memory_gb: float = DEFAULT_MEMORY_GB,
    executor: Executor | None = None,
    progress: Progress = ignore,
) -> xr.Dataset:
    """Map how quiet the sea floor is, from the bottom pressure of ocean models.

    One pass over each field: sums and normal equations of every cell grow block by block and add up over parts. Only
    where the sums of the whole grid do not fit into the memory allowed is the field cut into bands of rows, and an
    ocean mean that must be subtracted then takes one pass more.

    Parameters
    ----------
    fields : sequence of ModelField
        One for each ocean model, on one grid; their years may differ.
    record_years : sequence of float
        Lengths of records for which the noise at the annual line is given, years.
    reference_year : int, optional
        Phases count from its 1 January; the first year of the first field unless given.
    inflation_factor : float
        By which the models are taken to be too quiet where the sea floor is quiet; 1 switches it off.
    quiet_sd_hpa : float
        Standard deviation up to which a place counts as quiet, hPa.
    memory_gb : float
        Memory that one process may take for sums and blocks.
    executor : Executor, optional
        Who does the work; this process unless given.
    progress : callable, optional

    Returns
    -------
    xarray.Dataset
        contracts.QUIETNESS_MAP.

    Raises
    ------
    InputError
        Every fault of the fields: times, grid, land mask, size, and an ocean mean that was not removed.

    Examples
    --------
    >>> rng = np.random.default_rng(1)
    >>> time = np.arange("2011-01-03", "2017-01-01", 5, dtype="datetime64[D]").astype("datetime64[ns]")
    >>> lat, lon = [-15.0, -5.0, 5.0], [185.0, 195.0, 205.0]
    >>> noise = rng.normal(0.0, 1.0, (time.size, 3, 3)) * [50.0, 50.0, 200.0]
    >>> pressure = xr.DataArray(noise, dims=("time", "lat", "lon"), coords={"time": time, "lat": lat, "lon": lon})
    >>> found = screen_sea_floor([ModelField("invented", pressure, "removed")], record_years=[2.0])
    >>> (found["sd"].mean("lat") / 100.0).round(1).values
    array([0.5, 0.5, 2. ])
    """
    executor = executor or Embedded()
    jobs = _jobs(fields, reference_year, memory_gb)
    models: dict[str, CellNumbers] = {}
    faults: list[Fault] = []
    for job in jobs:
        with collect(faults), threadpool_limits(1):
            models[job.field.name] = _screen(job, record_years, executor, progress)
    if faults:
        raise InputError(faults)
    found = quietness_map(
        models, [job.grid for job in jobs], record_years=record_years, reference_year=jobs[0].design.reference_year,
        inflation_factor=inflation_factor, quiet_sd=quiet_sd_hpa * PASCAL_PER_HPA,
    )  # fmt: skip
    found = found.assign_coords(_facts(jobs))
    require(found, QUIETNESS_MAP)
    return found


def sums_alone(part: Part) -> Sums:
    """Sum up a part with one thread: several may round otherwise, and the result must not depend on who works.

    Parameters
    ----------
    part : Part

    Returns
    -------
    Sums
    """
    with threadpool_limits(1):
        return part_sums(part)


def means_alone(part: Part) -> tuple[Floats, Floats]:
    """Sum up what the ocean mean needs, with one thread.

    Parameters
    ----------
    part : Part

    Returns
    -------
    above, below : (n, 2) array
    """
    with threadpool_limits(1):
        return mean_sums(part)


def _facts(jobs: list[_Job]) -> dict[str, tuple[str, list[object], dict[str, str]]]:
    """Say of each model what it gave."""
    facts: dict[str, tuple[list[object], str]] = {
        "first_time": ([job.axis.time[0] for job in jobs], "first time of the model, UTC"),
        "last_time": ([job.axis.time[-1] for job in jobs], "last time of the model, UTC"),
        "step": ([job.axis.step_days for job in jobs], "length of an interval"),
        "years": ([job.axis.span_days / TROPICAL_YEAR_DAYS for job in jobs], "length of the model"),
        "lines": ([len(job.design.lines) for job in jobs], "lines beside the annual one that tell of its noise"),
        "ocean_mean": ([job.field.ocean_mean for job in jobs], "what was done about the ocean mean"),
        "ocean_share": ([_ocean_share(job) for job in jobs], "share of the area of the ocean that the model covers"),
        "readings": ([_readings(job) for job in jobs], "how often what is stored was read"),
    }
    units = {"step": {"units": "d"}, "years": {"units": "yr"}}
    return {
        name: ("model", values, {"long_name": text, **units.get(name, {})}) for name, (values, text) in facts.items()
    }


def _ocean_share(job: _Job) -> float:
    return float(job.weights[job.look.wet, 1].sum() / OceanFunction.builtin().area_m2)


def _readings(job: _Job) -> int:
    twice = job.field.ocean_mean == "subtract" and len(job.plan.bands) > 1
    return job.plan.readings * (2 if twice else 1)


def _jobs(fields: Sequence[ModelField], reference_year: int | None, memory_gb: float) -> list[_Job]:
    if not fields:
        raise InputError(Fault("screening", "fields", "no field is given", "At least one"))
    jobs: list[_Job] = []
    names = [field.name for field in fields]
    faults = [
        Fault(name, "name", "several models have this name", "Must be unique", "Give NAME=PATH")
        for name in sorted({name for name in names if names.count(name) > 1})
    ]
    ocean = OceanFunction.builtin()
    for field in fields:
        with collect(faults):
            source = field.source
            axis = time_axis(field.name, source.time)
            first_year = int(axis.years[0]) if reference_year is None else reference_year
            reference_year = first_year
            design, weights = make_design(axis, first_year), cell_weights(source, ocean)
            look = first_look(source)
            require_land_mask(field.name, look.wet, weights)
            plan = make_plan(source, axis, design, memory_gb)
            jobs.append(_Job(field, source, axis, screen_grid(source), weights, look, design, plan))
    faults += same_grid([job.field for job in jobs], [job.grid for job in jobs]) if jobs else []
    if faults:
        raise InputError(faults)
    return jobs


def _screen(job: _Job, record_years: Sequence[float], executor: Executor, progress: Progress) -> CellNumbers:
    """Numbers of every cell of one field."""
    subtract = job.field.ocean_mean == "subtract"
    ahead: Floats | str | None = None
    if subtract:
        ahead = "own" if len(job.plan.bands) == 1 else _mean_ahead(job, executor, progress)
    days = job.axis.days(job.design.reference_year)
    tables = line_noise(job.design, days, job.axis.step_days, record_years)
    found, means = [], []
    parts = [_part(job, band, span, ahead) for band in job.plan.bands for span in job.plan.spans]
    sums_of_parts = _followed(executor.results(sums_alone, parts), f"screening {job.field.name}", len(parts), progress)
    n_lon = job.source.longitude_deg.size
    for band in job.plan.bands:
        sums = next(sums_of_parts)
        for _ in job.plan.spans[1:]:
            sums = add_sums(sums, next(sums_of_parts))
        means.append((sums.mean_above, sums.mean_below))
        own = slice(band.start * n_lon, band.stop * n_lon)
        found.append(cell_numbers(sums, job.look.wet[own], tables, attenuation=attenuation(job.axis.step_days)))
    if not subtract:
        _require_mean_removed(job, *(np.sum(each, axis=0) for each in zip(*means, strict=True)))
    numbers = joined_cells(found)
    _require_size(job, numbers)
    return numbers


def _part(job: _Job, rows: slice, when: slice, mean: Floats | str | None) -> Part:
    n_lon = job.source.longitude_deg.size
    cells = slice(rows.start * n_lon, rows.stop * n_lon)
    counted = np.isin(job.axis.years, sorted(job.axis.whole_years))
    return Part(
        job.source,
        job.design,
        job.axis.days(job.design.reference_year),
        np.where(counted, job.axis.years, 0),
        when,
        rows,
        job.plan.block,
        job.look.rows(cells),
        job.weights[cells],
        mean,
    )


def _mean_ahead(job: _Job, executor: Executor, progress: Progress) -> Floats:
    """Ocean mean at every time, Pa, by a pass of its own; NaN where there is no value."""
    bands = [[_part(job, band, span, None) for span in job.plan.spans] for band in job.plan.bands]
    parts = [part for band in bands for part in band]
    made = _followed(executor.results(means_alone, parts), f"ocean mean of {job.field.name}", len(parts), progress)
    above, below = np.zeros((2, job.axis.time.size, 2))
    for band in bands:
        for part in band:
            own_above, own_below = next(made)
            above[part.when] += own_above
            below[part.when] += own_below
    return _quotient(above, below)[:, 0]


def _quotient(above: Floats, below: Floats) -> Floats:
    return np.divide(above, below, out=np.full_like(above, np.nan), where=below > 0.0)


def _followed(results: Iterator[Result], stage: str, total: int, progress: Progress) -> Iterator[Result]:
    progress(stage, 0, total)
    for done, result in enumerate(results, 1):
        progress(stage, done, total)
        yield result


def _require_mean_removed(job: _Job, above: Floats, below: Floats) -> None:
    """Refuse a whole ocean whose mean still has an annual cycle, with whole cells and with their ocean part."""
    if below[:, 1].max() < WHOLE_OCEAN_SHARE * OceanFunction.builtin().area_m2:
        return
    means = _quotient(above, below)
    known = np.isfinite(means).all(axis=1)
    left = min(
        abs(annual_phasor(Series(job.field.name, job.axis.time[known], mean), job.design.reference_year))
        for mean in means[known].T
    )
    if left > OCEAN_MEAN_LIMIT_HPA * PASCAL_PER_HPA:
        problem = f"its ocean mean is said to be removed, but has an annual cycle of {left / PASCAL_PER_HPA:.3f} hPa"
        allowed = f"Must be below {OCEAN_MEAN_LIMIT_HPA} hPa"
        action = f"Give --ocean-mean {job.field.name}=subtract"
        raise InputError(Fault(job.field.name, "ocean mean", problem, allowed, action))


def _require_size(job: _Job, numbers: CellNumbers) -> None:
    known = numbers.sd[np.isfinite(numbers.sd)]
    if not known.size:
        problem = f"no cell has values at {100 * LEAST_COVERAGE:.0f} % of the times"
        raise InputError(Fault(job.field.name, "pressure", problem, "", "Give a field with fewer gaps"))
    typical = float(np.median(known))
    if not _SMALLEST_SD <= typical <= _LARGEST_SD:
        problem = f"its bottom pressure varies by {typical / PASCAL_PER_HPA:.3g} hPa (1 sd) in the typical cell"
        allowed = "The ocean varies by a few hPa"
        raise InputError(Fault(job.field.name, "units", problem, allowed, "Correct the units in its files"))
