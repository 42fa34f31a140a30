"""The sentences that say what a run assumed, made from the network's own settings."""

from massfit.constants import KG_PER_GT
from massfit.network import Network, ReducedSite
from massfit.settings import Settings


def stated_assumptions(network: Network) -> tuple[str, ...]:
    """Say what a run of this network assumes, one sentence each.

    Parameters
    ----------
    network : Network

    Returns
    -------
    tuple of str
        In the order of the chain; printed in every output.
    """
    settings = network.settings
    return (
        _period(settings),
        *_corrections(network),
        *_circulation(network),
        *_reduced_elsewhere(network),
        *_fingerprint(network),
        *_drift_and_noise(network),
        *_posterior(settings),
    )


def site_assumptions(network: Network) -> tuple[str, ...]:
    """Say what the phasors of the sites of a network assume, one sentence each.

    Parameters
    ----------
    network : Network

    Returns
    -------
    tuple of str
    """
    frame = network.settings.frame
    first = frame.start.isoformat() if frame.start else "the first record"
    last = frame.end.isoformat() if frame.end else "the last record"
    return (
        f"Records are used from {first} to {last}; phases count from 1 January {frame.reference_year} 00:00 UTC. The "
        "phasor of a site is what is left of its record: the cycle of ocean mass as the site sees it, the response to "
        "the air over land, and the ocean dynamics that the models do not have.",
        *_corrections(network)[:-1],
        *_circulation(network),
        *_reduced_elsewhere(network),
        *_drift_and_noise(network),
        "Results are for research.",
    )


def fingerprint_assumptions(network: Network) -> tuple[str, ...]:
    """Say what the fingerprint of this network assumes, one sentence each.

    Parameters
    ----------
    network : Network

    Returns
    -------
    tuple of str
    """
    named: dict[str, list[str]] = {}
    for load in network.loads:
        named.setdefault(load.reference, []).append(load.name)
    members = "; ".join(", ".join(names) + (f" ({source})" if source else "") for source, names in named.items())
    given = network.atmosphere_load is not None or network.air_pressure is not None
    air = "its own self-attraction is given apart, as the response to air over land" if given else "none was given"
    return (
        *_fingerprint(network),
        f"The members: {members}. The recorders do not choose among them.",
        "An admittance is a property of place, load and Earth: no record and no ocean model was read. Phases count "
        f"from 1 January {network.settings.frame.reference_year} 00:00 UTC.",
        f"The pressure of air on land exchanges no mass with the ocean's water, so it is no load here; {air}.",
        "Land is where the ocean function says so, in cells of a quarter of a degree: marginal ice shelves are ocean, "
        "lakes are land.",
    )


def _period(settings: Settings) -> str:
    frame = settings.frame
    first = frame.start.isoformat() if frame.start else "the first record"
    last = frame.end.isoformat() if frame.end else "the last record"
    return (
        f"The answer is the mean annual cycle from {first} to {last}; phases count from 1 January "
        f"{frame.reference_year} 00:00 UTC. It is the water of the whole ocean: the air above it is not in it."
    )


def _corrections(network: Network) -> list[str]:
    chosen = network.settings.corrections
    tides = "removed here by harmonic fits" if chosen.tides == "remove" else "taken as already removed"
    long_period = {
        "equilibrium": "long-period tides removed as equilibrium tides, self-consistent over the real ocean",
        "equilibrium-classical": "long-period tides removed as classical equilibrium tides",
        "none": "long-period tides NOT removed here",
    }[chosen.long_period_tides]
    pole = (
        "pole tide removed from observed polar motion"
        if chosen.pole_tide == "observed"
        else "pole tide NOT removed here"
    )
    if not network.records:
        air = "taken as already removed"
    elif network.air_pressure is not None:
        air = "removed with the mean of the air-pressure field given"
    elif network.ocean_mean_atmosphere is not None:
        air = "removed with the series given"
    else:
        air = "taken as already removed"
    given = network.atmosphere_load is not None or network.air_pressure is not None
    land = (
        "The self-attraction of air on land is added as a known term."
        if given
        else "No air pressure on land was given, so its self-attraction (tenths of a millimetre a site) is left out."
    )
    return [
        *([f"Short tides are {tides}; {long_period}; {pole}."] if network.records else []),
        f"The ocean-mean air pressure is {air}, with a common error of "
        f"{chosen.ocean_mean_atmosphere_sd_hpa:g} hPa per component.",
        land,
    ]


def _circulation(network: Network) -> list[str]:
    count = len(network.circulation)
    if count == 0 and network.models_elsewhere and not network.records:
        return []
    if count == 0:
        return [
            "No ocean circulation model was given: its weather is part of the noise, its annual cycle stays in the "
            "phasors of the sites, and the spread between models is assumed from its prior, not seen."
        ]
    names = ", ".join(f"{model.name} (air pressure {model.air_pressure})" for model in network.circulation)
    cut = [model.name for model in network.circulation if model.partial == "cut"]
    if cut:
        names += f"; records are cut to the days of {', '.join(cut)} where these cover less"
    seen = "" if count > 1 else " With one model their spread is assumed from its prior, not seen."
    return [f"Ocean circulation is removed with {count} model{'s' if count > 1 else ''}: {names}.{seen}"]


def _reduced_elsewhere(network: Network) -> list[str]:
    left_out = {site.id for site in network.sites if site.excluded_because is not None}
    sites = [site for site in network.reduced if site.site not in left_out]
    if not sites:
        return []
    named = "; ".join(f"{each.site} ({_years(each)}, {_subtracted(each)})" for each in sites)
    return [
        "Sites reduced elsewhere, their phasors and covariances taken as given, with tides, pole tide, ocean-mean air "
        f"pressure and drift off and the response to the air over land still in: {named}."
    ]


def _years(reduced: ReducedSite) -> str:
    first, last = reduced.years
    return f"{first}" if first == last else f"{first} to {last}"


def _subtracted(reduced: ReducedSite) -> str:
    if not reduced.models:
        return "no model subtracted"
    each = f"{'less the mean of' if reduced.mean_only else 'less'} {', '.join(reduced.models)}"
    return each if reduced.mean_only or len(reduced.models) == 1 else f"{each} one by one"


def _fingerprint(network: Network) -> list[str]:
    chosen = network.settings.fingerprint
    count = len(network.loads)
    vapour = (
        f"water vapour exchanges {chosen.water_vapour_kg / KG_PER_GT:.0f} Gt (half range, maximum on "
        f"{chosen.water_vapour_peak})"
        if chosen.water_vapour_kg
        else "the exchange of water vapour is switched off"
    )
    members = f"{count} load member{'s' if count > 1 else ''} of equal weight"
    if any(load.name.startswith("perturbed ") for load in network.loads):
        members += (
            f" (amplitudes of the regions of perturbed ones spread by {chosen.perturbed_amplitude_sd:.0%}, "
            f"their timing by {chosen.perturbed_delay_sd_days:g} days)"
        )
    rotation = (
        "the annual wobble that loads and air cause is fed back (rotational feedback), that of the circulation is not"
        if chosen.rotational_feedback
        else "no rotational feedback"
    )
    earth = "PREM" if network.earth is None else f"the Earth profile {network.earth.name}"
    single = "" if count > 1 else " With one member the uncertainty of the fingerprint is NOT in the result."
    return [
        f"The fingerprint is elastic ({earth}), to degree {chosen.max_degree}, sea water "
        f"{chosen.sea_water_density:g} kg m-3, {members}; {vapour}; {rotation}.{single}"
    ]


def _drift_and_noise(network: Network) -> list[str]:
    if not network.records:
        return []
    forms = sorted({record.drift for record in network.records})
    priors = network.settings.priors
    scales = f"{min(priors.noise_time_scales_days):g} to {max(priors.noise_time_scales_days):g}"
    found = any(record.find_steps for record in network.records)
    steps = "changes of level are searched for, fitted and listed" if found else "only declared changes are fitted"
    noise = f"weighed by evidence ({' / '.join(priors.noise_forms)}; time scales {scales} days)"
    return [
        f"Drift per deployment ({' / '.join(forms)}), annual and semi-annual cycle are fitted together under noise "
        f"whose form is {noise}; {steps}."
    ]


def _posterior(settings: Settings) -> list[str]:
    truth = (
        "The truth is taken as exchangeable with the ocean models (r = 1)"
        if settings.posterior.model_truth == "exchangeable"
        else "The truth is taken as the centre of the ocean models (r = 0)"
    )
    chosen = settings.posterior
    scatter = "Student's with 4 degrees of freedom" if chosen.site_scatter == "student-t" else "normal"
    if chosen.group_scatter is True:
        shared = "sites of one group share a part of it"
    elif chosen.group_scatter is False:
        shared = "independent between sites"
    else:
        shared = f"correlated over {chosen.group_scatter:g} km"
    return [
        f"{truth}. Site scatter is {scatter}, {shared}; the cycle of a year differs from the mean of the period by "
        f"{settings.priors.year_sd_hpa:g} hPa (1 sd, in phase and in quadrature).",
        "Results are for research.",
    ]
