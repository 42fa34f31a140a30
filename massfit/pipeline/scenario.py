"""Finished results under a scenario of the page's bench."""

from pathlib import Path
from typing import Any

from massfit.io.results.read_results import read_results
from massfit.io.results.results_folder import RUN_FILE
from massfit.io.results.scenario_file import read_scenario
from massfit.pipeline.folders import output_folder
from massfit.results.bench import as_run, scenario_summary, student_summary


def answer_scenario_file(place: Path, output: Path | None, scenario: Path, *, student: bool = True) -> dict[str, Any]:
    """Answer a saved scenario from finished results, with normal site scatter, as the bench of the page does.

    Parameters
    ----------
    place : Path
        A results folder, or a network whose results stand beside it or in `output`.
    output : Path or None
    scenario : Path
    student : bool
        Where the run had Student-t scatter, answer with that too, which takes some seconds.

    Returns
    -------
    dict
        As `massfit.results.bench.scenario_summary`. `everything`: the same where nothing is left out and the choices
        are those of the run; `student_t`: as `massfit.results.bench.student_summary`; `run`: the answer of the run.

    Raises
    ------
    InputError
        There are no finished results, or the scenario has a fault.
    """
    run = read_results(place if (place / RUN_FILE).exists() else output_folder(place, output, "results"))
    chosen = as_run(run)
    asked = read_scenario(scenario, network=run.summary["network"], chosen=chosen)
    return {
        **scenario_summary(run, asked),
        "everything": scenario_summary(run, chosen),
        "student_t": student_summary(run, asked) if student else None,
        "run": {name: run.summary[name] for name in ("amplitude_hpa", "peak_day", "in_phase_hpa", "quadrature_hpa")},
        "reference_year": run.summary["reference_year"],
    }
