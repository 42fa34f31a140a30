"""The page that goes with an invented network: what the analyst knows, and how it was made."""

from collections.abc import Mapping
from typing import Any

from massfit.simulate.network import SimulatedNetwork
from massfit.simulate.options import SimulationOptions

_TEXT = """\
# {name}

Everything here is invented: the institute, the ship, the sites, the models and the ocean itself.

The Quillmere Institute of the Sea keeps pressure recorders at {n_sites} places on the deep sea floor. Its ship
*Solvarra* lays them, takes them up a year or two later, and lays the next. You are asked how much the mass of the ocean
rises and falls through the year, when it peaks, and how sure you are.

## What you know

{knowledge}

## What is in the folder

| file | content |
|---|---|
| `network.toml` | the network file: sites, recorders, corrections, models; commented |
| `records/` | one file a recorder, {sampling} |
| `fields/ocean_mean_atmosphere.csv` | mean air pressure over the ocean; its annual cycle is a little wrong |
| `fields/atmosphere_load.nc` | annual cycle of air pressure on land |
| `fields/loads.nc` | {n_loads} plausible annual patterns of water and snow on land; none is the true one |
{model_rows}{gravity_rows}| `truth.json` | what really happened: not for the analyst |

## What to do

```bash
massfit estimate {folder}
```

## What to expect

- Every recorder drifts by tens of hPa after it reaches the bottom, far more than the annual cycle.
- The models catch most of the ocean's weather, err at the annual line, and share a part of that error.
- The noise is red and of no form that the analysis assumes. The load was solved to a higher degree than yours.
{satellites}- The uncertainty should hold the truth, not hug it: of twenty networks like this one, the truth of one is
  expected to lie outside its 95 % region.

When you have your answer, compare it with `amplitude_hpa` and `peak_day` in `truth.json` (days after 1 January
00:00 UTC of the reference year).

## How it was made

```bash
{command}
```

The same command gives the same network again (another processor may round single values differently).
"""

_SATELLITES = """\
- The satellites see the same water, at the coast the land's too; each year differs a little from the mean of all, and
  between two pairs of satellites months are missing.
"""

_ROLES = {
    "eddies": "{site} lies under a field of eddies that no model has.",
    "overlap": "At {site} the second recorder was laid months before the first was taken up.",
    "step": "The first recorder at {site} was hit by a trawl; the time is in the network file.",
    "short": "{site} has a single recorder, for little more than a year.",
    "disturbed": "The first recorder at {site} was off the bottom for some days; the network file leaves them out.",
    "missing": "{site} is not among the points that the model {model} delivers.",
    "text": "The last recorder at {site} came as a text file, in dbar.",
}


def tell_story(simulated: SimulatedNetwork, options: SimulationOptions, *, folder: str) -> str:
    """Write the README of an invented network.

    Parameters
    ----------
    simulated : SimulatedNetwork
    options : SimulationOptions
        With which it was made.
    folder : str
        Where it will lie, as the reader types it.

    Returns
    -------
    str
        Markdown, without any number that a run would give.
    """
    network = simulated.network
    raw = options.sampling != "daily"
    every = "every 15 s" if options.sampling == "15s" else "hourly"
    return _TEXT.format(
        name=network.settings.frame.name,
        n_sites=len(network.sites),
        n_loads=len(network.loads),
        knowledge="\n".join(f"- {line}" for line in _knowledge(simulated, raw=raw)),
        sampling=f"{every}, with short tides" if raw else "daily means, short tides removed",
        model_rows="".join(_model_rows(simulated)),
        gravity_rows="".join(_gravity_rows(simulated)),
        satellites="" if simulated.gravity is None else _SATELLITES,
        folder=folder,
        command=command_line(options, seed=simulated.truth["seed"], folder=folder),
    )


def command_line(options: SimulationOptions, *, seed: int, folder: str) -> str:
    """Give the command that makes the network.

    Examples
    --------
    >>> command_line(SimulationOptions(years=4), seed=7, folder="here")
    'massfit simulate here --seed 7 --sites 18 --years 4 --models 3 --noise 1 --sampling hourly --satellites 0'
    """
    return (
        f"massfit simulate {folder} --seed {seed} --sites {options.sites} --years {options.years:g} "
        f"--models {options.models} --noise {options.noise:g} --sampling {options.sampling} "
        f"--satellites {options.satellites}"
    )


def _knowledge(simulated: SimulatedNetwork, *, raw: bool) -> list[str]:
    frame, models = simulated.network.settings.frame, simulated.network.circulation
    lines = [f"The records run from {frame.start} to {frame.end}; the cycle is asked as the mean over that time."]
    if raw:
        lines.append("The records are raw: tides, spikes and lost samples are in them.")
    sites: list[Mapping[str, Any]] = simulated.truth["sites"]
    for role, text in _ROLES.items():
        if role != "missing" or len(models) > 1:
            model = models[0].name if models else ""
            lines += [text.format(site=site["id"], model=model) for site in sites if site["role"] == role]
    return lines


def _gravity_rows(simulated: SimulatedNetwork) -> list[str]:
    gravity = simulated.gravity
    if gravity is None:
        return []
    chosen, months = gravity.settings, len(gravity.solutions[0].fields)
    rows = [
        f"| `{file}` | {months} monthly gravity fields of the centre {solution.name}, no degree 0 and 1, a poor C20 |\n"
        for file, solution in zip(chosen.fields, gravity.solutions, strict=True)
    ]
    return [
        *rows,
        f"| `{chosen.degree_one}`, `{chosen.low_degree}` | degree 1 of the water; C20 and C30 to replace |\n",
        f"| `{chosen.determinations}` | what others found, to be set beside |\n",
    ]


def _model_rows(simulated: SimulatedNetwork) -> list[str]:
    rows = []
    for model in simulated.network.circulation:
        file = f"fields/{model.name.lower().replace('-', '_')}"
        if "lat" in model.pressure.dims:
            text = "on a grid, five-day means, ocean mean removed, without self-attraction"
        elif model.ocean_mean is None:
            text = "at the sites, daily, ocean mean removed"
        else:
            text = "at the sites, daily, with its own ocean mean left in"
            text += f" (that mean is in `{file}_ocean_mean.csv`)"
        rows.append(f"| `{file}.nc` | bottom pressure of the model {model.name}, {text} |\n")
    return rows
