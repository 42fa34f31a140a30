"""The annual cycle of global ocean mass from sea-floor pressure recorders."""

from importlib import import_module

_HOMES = {
    "CirculationModel": "massfit.network",
    "InputError": "massfit.errors",
    "LoadPattern": "massfit.fingerprint.pattern",
    "ModelField": "massfit.screening.field",
    "Network": "massfit.network",
    "OceanFunction": "massfit.fingerprint.ocean",
    "Record": "massfit.records.record",
    "ReducedRecord": "massfit.annual.record",
    "ReducedSite": "massfit.network",
    "Series": "massfit.network",
    "Settings": "massfit.settings",
    "SimulationOptions": "massfit.simulate.options",
    "Site": "massfit.site",
    "builtin_loads": "massfit.fingerprint.loads",
    "compare_gravity": "massfit.pipeline.compare",
    "draw_admittances": "massfit.fingerprint.regions",
    "estimate": "massfit.pipeline.estimate",
    "fit_site": "massfit.annual.fit",
    "love_numbers": "massfit.earth.love",
    "make_settings": "massfit.settings",
    "prepare_operator": "massfit.fingerprint.operator",
    "rank_sites": "massfit.pipeline.rank_sites",
    "read_gravity": "massfit.io.gravity.read_gravity",
    "read_network": "massfit.io.network.network_file",
    "regional_responses": "massfit.fingerprint.regions",
    "sample_posterior": "massfit.posterior.sample",
    "screen_sea_floor": "massfit.pipeline.screen",
    "simulate_network": "massfit.simulate.network",
    "site_fingerprints": "massfit.fingerprint.admittance",
    "site_footprints": "massfit.fingerprint.footprint",
    "solve_sea_level": "massfit.fingerprint.sea_level",
    "study_fingerprint": "massfit.pipeline.fingerprint_study",
}

__all__ = sorted(_HOMES)  # noqa: PLE0605 - the table above is the one list of public names
__version__ = "0.1.0"


def __getattr__(name: str) -> object:
    """Import a public name when it is first used (PEP 562)."""
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'massfit' has no attribute {name!r}")


def __dir__() -> list[str]:
    """Public names."""
    return [*__all__, "__version__"]
