"""The commands; each loads, calls and writes. Heavy imports live inside them, so that --help is quick."""

import json
import os
import sys
from pathlib import Path
from typing import Any, Literal

import click

from massfit.cli.progress import shown_progress
from massfit.cli.refusal import NOT_TRUSTWORTHY, refusing_politely

_FOLDER = click.Path(path_type=Path)


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 80})
@click.version_option(package_name="massfit")
def main() -> None:
    """Measure the annual cycle of global ocean mass with sea-floor pressure.

    A network is a folder with a network.toml. Exit codes: 0 done; 2 the input
    is wrong, and nothing was written; 3 computed, but not trustworthy; 130
    interrupted, the same command goes on with what was finished.
    Results are for research; records of hazard-warning stations must not be
    touched operationally on the strength of this tool.
    """


@main.command()
@click.argument("network", type=_FOLDER)
@click.option("--output", type=_FOLDER, help="Results folder  [default: results/ beside the network file]")
@click.option("--overwrite", is_flag=True, help="Replace finished results.")
@click.option("--outside", is_flag=True, help="Allow paths outside the network's folder.")
@click.option("--what-if", is_flag=True, help="Also answer under every other choice (minutes).")
@click.option("--calibrate", type=click.IntRange(1, 10_000), metavar="N", help="Also analyse N surrogates (try 20).")
@click.option("--scenario", type=_FOLDER, metavar="FILE", help="Answer a scenario of the page from finished results.")
@click.option("--quiet", is_flag=True, help="Print nothing but errors.")
@click.option("--json", "as_json", is_flag=True, help="Print estimate.json instead of the summary.")
def estimate(
    network: Path, output: Path | None, *, overwrite: bool, outside: bool, what_if: bool, calibrate: int | None,
    scenario: Path | None, quiet: bool, as_json: bool,
) -> None:  # fmt: skip
    """Do the main job: from raw records to the network posterior.

    NETWORK is a network.toml or the folder that holds one. Writes a results
    folder with estimate.json, NetCDF files, figures and report.html, and prints
    a summary. With --scenario nothing is computed anew or written: NETWORK may
    be a results folder.
    """
    if scenario is not None:
        return _answer_scenario(network, output, scenario, as_json)
    with refusing_politely(), shown_progress(quiet=quiet) as progress:
        from massfit.pipeline.folders import output_folder
        from massfit.pipeline.save import estimate_to_folder

        folder = output_folder(network, output, "results")
        result = estimate_to_folder(
            network, folder, overwrite=overwrite, outside=outside, what_if=what_if,
            surrogates=calibrate or 0, progress=progress, workers=os.cpu_count() or 1,
        )  # fmt: skip
    from massfit.report.words.run_text import summary_text

    if as_json:
        click.echo(json.dumps(result.summary, indent=2))
    elif not quiet:
        click.echo(f"{summary_text(result.summary)}\n\nResults in {folder}: start with report.html")
    sys.exit(0 if result.summary["convergence"]["converged"] else NOT_TRUSTWORTHY)


def _answer_scenario(place: Path, output: Path | None, scenario: Path, as_json: bool) -> None:
    with refusing_politely():
        from massfit.pipeline.scenario import answer_scenario_file

        answer = answer_scenario_file(place, output, scenario)
    from massfit.report.words.scenario_text import scenario_text

    click.echo(json.dumps(answer, indent=2) if as_json else scenario_text(answer))


@main.command()
@click.argument("network", type=_FOLDER)
@click.option("--output", type=_FOLDER, help="Folder  [default: fingerprint/ beside the network file]")
@click.option("--finest", type=click.IntRange(45, 1440), default=360, show_default=True, help="Degree compared with.")
@click.option("--overwrite", is_flag=True, help="Replace an earlier fingerprint.")
@click.option("--outside", is_flag=True, help="Allow paths outside the network's folder.")
@click.option("--quiet", is_flag=True, help="Print nothing but errors.")
def fingerprint(network: Path, output: Path | None, finest: int, overwrite: bool, outside: bool, quiet: bool) -> None:
    """Show how each site sees the cycle of ocean mass.

    Reads places and loads of NETWORK; records and ocean models need not be
    there. Writes maps, footprints, a table, a NetCDF file and fingerprint.html,
    and prints the table.
    """
    with refusing_politely(), shown_progress(quiet=quiet) as progress:
        from massfit.pipeline.folders import output_folder
        from massfit.pipeline.save_fingerprint import fingerprint_to_folder

        folder, switches = output_folder(network, output, "fingerprint"), {"overwrite": overwrite, "outside": outside}
        threads = os.cpu_count() or 1
        study = fingerprint_to_folder(
            network, folder, finest_degree=finest, progress=progress, threads=threads, **switches
        )
    from massfit.report.words.fingerprint_text import fingerprint_text

    if not quiet:
        click.echo(f"{fingerprint_text(study)}\n\nResults in {folder}: start with fingerprint.html")


@main.command()
@click.argument("network", type=_FOLDER)
@click.option("--output", type=_FOLDER, help="Folder to be made  [default: phasors/ beside the network file]")
@click.option("--overwrite", is_flag=True, help="Replace what a finished run left there.")
@click.option("--outside", is_flag=True, help="Allow paths outside the network's folder.")
@click.option("--quiet", is_flag=True, help="Print nothing but errors.")
@click.option("--json", "as_json", is_flag=True, help="Print phasors.json instead of the table.")
def phasors(network: Path, output: Path | None, overwrite: bool, outside: bool, quiet: bool, as_json: bool) -> None:
    """Reduce and judge every site, without a network posterior.

    NETWORK is a network.toml or the folder that holds one. Writes a folder with
    a figure for each site, what each correction did, a table, NetCDF files and
    phasors.html, and prints the table.
    """
    with refusing_politely(), shown_progress(quiet=quiet) as progress:
        from massfit.pipeline.folders import output_folder
        from massfit.pipeline.phasors import phasors_to_folder

        made, cores = output_folder(network, output, "phasors"), os.cpu_count() or 1
        run = phasors_to_folder(network, made, overwrite=overwrite, outside=outside, progress=progress, workers=cores)
    from massfit.report.words.site_text import site_text

    if as_json:
        click.echo(json.dumps(run.summary, indent=2))
    elif not quiet:
        click.echo(f"{site_text(run.summary)}\n\nResults in {made}: start with phasors.html")


@main.command()
@click.argument("folder", type=_FOLDER)
@click.option("--seed", type=click.IntRange(min=0), default=1, show_default=True, help="Seed of the invention.")
@click.option("--sites", type=click.IntRange(1, 60), default=18, show_default=True, help="Number of sites.")
@click.option("--years", type=click.FloatRange(1.0, 12.0), default=4.0, show_default=True, help="Length, years.")
@click.option("--models", type=click.IntRange(0, 12), default=3, show_default=True, help="Number of ocean models.")
@click.option("--noise", type=click.FloatRange(0.0, 20.0), default=1.0, show_default=True, help="Scale of the noise.")
@click.option("--sampling", type=click.Choice(["hourly", "15s", "daily"]), default="hourly", show_default=True)
@click.option("--satellites", type=click.IntRange(0, 4), default=2, show_default=True, help="Gravity centres.")
@click.option("--sea-floor", is_flag=True, help="Also fields of ocean models for massfit screen.")
def simulate(
    folder: Path, seed: int, sites: int, years: float, models: int, noise: float, sampling: str, satellites: int,
    sea_floor: bool,
) -> None:  # fmt: skip
    """Invent a network with known truth and write it to FOLDER.

    FOLDER must not exist or be empty. The truth is in truth.json; the rest is
    what an analyst would have, ready for `massfit estimate FOLDER`.
    """
    with refusing_politely():
        from massfit.pipeline.invent import simulate_to_folder

        simulate_to_folder(
            folder, seed, sites=sites, years=years, models=models, noise=noise, sampling=sampling,
            satellites=satellites, sea_floor=sea_floor,
        )  # fmt: skip
    click.echo(f"Wrote an invented network to {folder}. Next: massfit estimate {folder}")


@main.command()
@click.argument("folder", type=_FOLDER)
def starter(folder: Path) -> None:
    """Begin a network file from a folder of records.

    Looks at the NetCDF and text files in FOLDER and in the folders inside it, and
    writes FOLDER/network.toml to be completed: what was told from the files is
    marked "# guess:" with its evidence, what could not be told is left empty and
    marked "# fill in:". A network file that is there is never overwritten.
    """
    with refusing_politely():
        from massfit.pipeline.starter import begin_network_file

        made = begin_network_file(folder)
    click.echo(f"Wrote {folder / 'network.toml'}: {made.counted}.\nThen run: massfit check {folder}")


@main.command()
@click.argument("results", type=_FOLDER)
def report(results: Path) -> None:
    """Draw page and figures anew from the files in RESULTS alone.

    RESULTS is a folder of massfit estimate or massfit phasors. Every file is
    first held against its checksum in run.json; one that was changed is named,
    and nothing is written.
    """
    with refusing_politely():
        from massfit.pipeline.redraw import redraw

        page = redraw(results, workers=os.cpu_count() or 1)
    click.echo(f"Drew {page} and the figures anew.")


@main.command()
@click.argument("results", type=_FOLDER)
@click.option("--bibtex", is_flag=True, help="Print BibTeX instead of text.")
def cite(results: Path, *, bibtex: bool) -> None:
    """Say what to cite: the methods and data behind RESULTS, and no others.

    Your own data are named as the network file states them (`reference` of a
    site or ocean model, `references` of the network).
    """
    with refusing_politely():
        from massfit.io.results.read_results import read_results
        from massfit.report.words.citation_text import citation_bibtex, citation_text
        from massfit.results.citations import citations

        run = read_results(results)
        cited, version = citations(run), run.provenance["massfit"]
    text = citation_text(cited, network=run.summary["network"], version=version)
    click.echo(citation_bibtex(cited, version=version) if bibtex else text)


@main.command()
@click.argument("results", type=_FOLDER)
@click.option("--network", type=_FOLDER, help="Network file with [gravity]  [default: beside RESULTS]")
@click.option("--gravity", type=_FOLDER, help="Folder, archive or file of satellite gravity, for those of [gravity].")
@click.option("--outside", is_flag=True, help="Allow paths outside the network's folder.")
@click.option("--quiet", is_flag=True, help="Print nothing but errors.")
def compare(results: Path, network: Path | None, gravity: Path | None, outside: bool, quiet: bool) -> None:
    """Set finished RESULTS beside satellite gravity.

    Reads [gravity] of the network file, makes the satellites' ocean mean with the
    network's own ocean, years, conventions and fingerprints, and adds the
    comparison to RESULTS: comparison.nc, estimate.json and the page.
    """
    with refusing_politely(), shown_progress(quiet=quiet) as progress:
        from massfit.pipeline.save import compare_to_folder

        run = compare_to_folder(results, network, gravity, outside=outside, progress=progress)
    from massfit.report.words.comparison_text import comparison_text

    if not quiet:
        click.echo(comparison_text(run.summary["comparison"]))


@main.command()
@click.argument("fields", nargs=-1, required=True, metavar="FIELDS...")
@click.option("--output", type=_FOLDER, default="screening", show_default=True, help="Folder to be made.")
@click.option("--ocean-mean", multiple=True, metavar="CHOICE", help="subtract or removed, or NAME=CHOICE. No default.")
@click.option("--variable", help="Variable of bottom pressure, where several could be meant.")
@click.option("--network", type=_FOLDER, help="Network file or results, to place its sites on the map.")
@click.option("--years", "record_years", type=click.FloatRange(1.0, 30.0), multiple=True, help="Length of a record.")
@click.option("--inflation", "inflation_factor", type=click.FloatRange(1.0, 10.0), default=1.5, show_default=True,
              help="On quiet places of models.")  # fmt: skip
@click.option("--quiet-sd", "quiet_sd_hpa", type=click.FloatRange(0.01, 100.0), default=1.0, show_default=True,
              help="Up to which a place is quiet, hPa.")  # fmt: skip
@click.option("--memory", "memory_gb", type=click.FloatRange(0.05, 4096.0), default=1.5, show_default=True,
              help="Of a process, GB.")  # fmt: skip
@click.option("--workers", type=click.IntRange(1, 1024), help="Share among N processes (needs Dask).")
@click.option("--scheduler", metavar="ADDRESS", help="Share on a Dask cluster that is there.")
@click.option("--overwrite", is_flag=True, help="Replace an earlier screening.")
@click.option("--quiet", is_flag=True, help="Print nothing but errors.")
def screen(fields: tuple[str, ...], output: Path, quiet: bool, **options: Any) -> None:
    """Map where the sea floor is quiet, from ocean models.

    FIELDS are one model each: PATH or NAME=PATH of a NetCDF file, a Zarr store, a
    folder of files or a pattern in quotes, with bottom pressure over time,
    latitude and longitude. Writes screening.nc, maps, a table of the sites and
    screening.html, and prints how quiet the sea floor is.
    """
    with refusing_politely(), shown_progress(quiet=quiet) as progress:
        from massfit.pipeline.save_screen import screen_to_folder

        run = screen_to_folder(fields, output, progress=progress, **options)
    from massfit.report.words.screening_text import screening_text

    if not quiet:
        click.echo(f"{screening_text(run.summary)}\n\nResults in {output}: start with screening.html")


@main.command()
@click.argument("results", type=_FOLDER)
@click.option("--network", type=_FOLDER, help="Network file of the results  [default: beside RESULTS]")
@click.option("--years", type=click.FloatRange(0.5, 10.0), default=2.0, show_default=True, help="Planned record.")
@click.option("--noise", type=click.FloatRange(0.01, 100.0), metavar="HPA", help="Daily noise of the next recorder.")
@click.option("--quietness", type=_FOLDER, metavar="FILE", help="screening.nc of massfit screen.")
@click.option("--depths", type=_FOLDER, metavar="FILE", help="NetCDF of depths of the sea floor.")
@click.option("--candidates", type=_FOLDER, metavar="FILE", help="CSV: name,latitude,longitude[,depth_m,noise_hpa].")
@click.option("--target-width", type=click.FloatRange(0.001, 10.0), metavar="HPA", help="Error to be reached.")
@click.option("--by", type=_FOLDER, metavar="FILE", help="CSV: site,value; keep sites of small values first.")
@click.option("--subsets", type=click.IntRange(1, 100_000), default=20, show_default=True, help="Subsets of each size.")
@click.option("--workers", type=click.IntRange(1, 1024), help="Share the subsets among N processes (needs Dask).")
@click.option("--scheduler", metavar="ADDRESS", help="Share the subsets on a Dask cluster that is there.")
@click.option("--outside", is_flag=True, help="Allow paths outside the network's folder.")
@click.option("--quiet", is_flag=True, help="Print nothing but errors.")
def siting(
    results: Path, network: Path | None, years: float, noise: float | None, quietness: Path | None,
    depths: Path | None, candidates: Path | None, target_width: float | None, by: Path | None, subsets: int, *,
    quiet: bool, **options: Any,
) -> None:  # fmt: skip
    """Say which sites carry the answer and where the next recorder belongs.

    Leaves sites out of finished RESULTS, says how few would do and which to
    keep, maps what one recorder more would do, lists the best places and those
    asked about, years of record that are needed, and what becomes of the answer
    as recorders fail or are redeployed. Adds siting.nc, figures and a section
    of the page to RESULTS, and prints tables.
    """
    with refusing_politely(), shown_progress(quiet=quiet) as progress:
        from massfit.pipeline.siting import SitingFiles, siting_to_folder

        files = SitingFiles(years, noise, target_width, candidates, quietness, depths, by, subsets)
        run = siting_to_folder(results, network, files, progress=progress, **options)
    from massfit.report.words.siting_plan_text import siting_plan_text
    from massfit.report.words.siting_text import siting_text

    if not quiet:
        tables = f"{siting_text(run.summary['siting'])}\n\n{siting_plan_text(run.datasets)}"
        click.echo(f"{tables}\n\nResults in {results}: siting.nc, report.html")


@main.command()
@click.argument("first", type=_FOLDER)
@click.argument("second", type=_FOLDER)
@click.option("--json", "as_json", is_flag=True, help="Print JSON.")
def contrast(first: Path, second: Path, as_json: bool) -> None:
    """Say what differs between two results folders.

    Inputs, settings, versions, sites, answer and warnings; SECOND less FIRST.
    """
    with refusing_politely():
        from massfit.pipeline.contrast import contrast_folders

        differences = contrast_folders(first, second)
    from massfit.report.words.contrast_text import contrast_text

    text = json.dumps(differences, indent=2) if as_json else contrast_text(differences, str(first), str(second))
    click.echo(text)


@main.command()
@click.argument("network", type=_FOLDER)
@click.option("--outside", is_flag=True, help="Allow paths outside the network's folder.")
@click.option("--json", "as_json", is_flag=True, help="Print JSON instead of text.")
def check(network: Path, outside: bool, as_json: bool) -> None:
    """Validate a network and show what would be used.

    NETWORK is a network.toml or the folder that holds one. Nothing is computed
    or written. Prints for each site a calendar of its months, its deployments
    and models, then what will be assumed and every warning. All faults are
    listed at once, with exit code 2.
    """
    with refusing_politely():
        from massfit.pipeline.check import check_network, refuse
        from massfit.report.words.check_text import check_text, in_json

        looked_at = check_network(network, outside=outside)
        plain = "utf" not in (sys.stdout.encoding or "").casefold()
        click.echo(in_json(looked_at.found) if as_json else check_text(looked_at.found, plain=plain))
        refuse(looked_at)


@main.command("love-numbers")
@click.option("--output", type=_FOLDER, required=True, help="CSV file to write.")
@click.option("--earth", type=_FOLDER, help="CSV of an Earth profile  [default: PREM]")
@click.option("--max-degree", type=click.IntRange(1, 100_000), default=400, show_default=True, help="Highest degree.")
@click.option("--frame", type=click.Choice(["CE", "CM", "CF"]), default="CF", show_default=True, help="Of degree one.")
@click.option("--overwrite", is_flag=True, help="Replace a file that is there.")
def love_numbers(
    output: Path, earth: Path | None, max_degree: int, frame: Literal["CE", "CM", "CF"], overwrite: bool
) -> None:
    """Write the load Love numbers of an Earth profile.

    The CSV has degree, h, l and k below comment lines that say which profile,
    frame and method they come from.
    """
    with refusing_politely():
        from massfit.pipeline.love import love_numbers_to_file

        love = love_numbers_to_file(output, earth=earth, max_degree=max_degree, frame=frame, overwrite=overwrite)
    click.echo(f"Wrote degrees 0 to {love.max_degree} of {love.profile} to {output}.")
