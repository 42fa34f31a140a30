"""Other choices of the network stage: each changes what its name says, and nothing else."""

from dataclasses import replace

import numpy as np
import pytest
import xarray as xr

from massfit.posterior.observations import read_observations
from massfit.posterior.sample import sample_posterior
from massfit.posterior.what_if import (
    Variant,
    answer_of,
    network_variants,
    single_members,
    variant_answer,
    without_model,
)
from massfit.settings import PosteriorSettings, Priors

PLAIN = PosteriorSettings(site_scatter="normal", group_scatter=False)


@pytest.fixture(scope="module")
def base(invent) -> Variant:
    phasors, fingerprints = invent(3, sites=6, models=3, missing=0.3, members=2).datasets()
    phasors = phasors.assign_coords(group=("site", ["north"] * 3 + ["south"] * 3))
    return Variant("", "", phasors, fingerprints, PLAIN, Priors(), 0.04)


def by_name(base: Variant) -> dict[str, Variant]:
    variants = network_variants(base)
    assert len({variant.name for variant in variants}) == len(variants)
    return {variant.name: variant for variant in variants}


def test_every_choice_is_there_and_changes_one_thing(base: Variant) -> None:
    variants = by_name(base)
    changed = {}
    for name, variant in variants.items():
        parts = [
            key for key in ("settings", "priors", "atmosphere_sd_hpa") if getattr(variant, key) != getattr(base, key)
        ]
        parts += [key for key in ("phasors", "fingerprints") if getattr(variant, key) is not getattr(base, key)]
        changed[name] = parts
    assert all(len(parts) == 1 for parts in changed.values()), changed
    assert variants["truth at the models' centre (r = 0)"].settings.model_truth == "centred"
    assert variants["Student-t site scatter"].settings.site_scatter == "student-t"
    assert variants["neighbours share scatter (by group)"].settings.group_scatter is True
    assert variants["half the prior of s_common (models, shared)"].priors.model_common_hpa == 0.075
    assert variants["double the prior of s_site (site scatter)"].priors.site_scatter_hpa == 0.6
    assert variants["air pressure without error"].atmosphere_sd_hpa == 0.0
    assert variants["double the air-pressure error (0.08 hPa)"].atmosphere_sd_hpa == 0.08
    assert sum(name.startswith("without model") for name in variants) == 3
    assert variants["uniform ocean (F = 1)"].fingerprints["admittance"].values.tolist() == [[[1.0, 0.0]] * 6]


def test_what_a_network_does_not_have_is_no_choice(base: Variant, invent) -> None:
    names = set(by_name(base))
    assert not {name for name in names if "s_group" in name or "unmodelled" in name}
    grouped = by_name(replace(base, settings=replace(PLAIN, group_scatter=True)))
    assert grouped["double the prior of s_group (shared scatter)"].priors.group_scatter_hpa == 0.3
    alone = by_name(replace(base, phasors=base.phasors.drop_vars("group")))
    assert not {name for name in alone if "neighbours" in name}
    phasors, fingerprints = invent(3, sites=4, models=2, bare_sites=1).datasets()
    bare = by_name(replace(base, phasors=phasors, fingerprints=fingerprints))
    assert bare["half the sd of the unmodelled circulation"].priors.unmodelled_annual_hpa == 0.5


def test_the_other_choice_of_every_default_is_its_opposite(base: Variant) -> None:
    opposite = PosteriorSettings(site_scatter="student-t", group_scatter=True, model_truth="centred")
    variants = by_name(replace(base, settings=opposite))
    assert variants["truth exchangeable with the models (r = 1)"].settings.model_truth == "exchangeable"
    assert variants["normal site scatter"].settings.site_scatter == "normal"
    assert variants["neighbours independent"].settings.group_scatter is False


def test_leaving_a_model_out_is_that_of_the_observations(base: Variant) -> None:
    observations, _ = read_observations(base.phasors, base.fingerprints)
    for model in observations.models:
        fewer, lost = without_model(base.phasors, model)
        expected, left = observations.without_model(model)
        seen, _ = read_observations(fewer, base.fingerprints)
        assert seen.sites == expected.sites
        assert lost == (~left).sum()
        np.testing.assert_array_equal(seen.phasor, expected.phasor)


def test_a_site_of_which_only_the_mean_is_known_goes_with_any_of_its_models(base: Variant) -> None:
    marked = base.phasors.assign(mean_only=("site", np.eye(6, dtype=np.int8)[2], {"units": "1"}))
    had = np.isfinite(marked["phasor"].values[2, 0, :, 0])
    for model, there in zip(marked["model"].values, had, strict=True):
        fewer, _ = without_model(marked, str(model))
        assert ("site 3" in fewer["site"].values) == (not there)


def test_reference_fingerprints_are_taken_and_the_uniform_one_once(base: Variant) -> None:
    cases = np.stack([np.tile([1.0, 0.0], (6, 1)), np.tile([1.1, 0.02], (6, 1))])
    prints = base.fingerprints.assign_coords(case=["uniform ocean", "uniform over land"])
    prints["reference_admittance"] = xr.DataArray(cases, dims=("case", "site", "component"), attrs={"units": "1"})
    names = [variant.name for variant in network_variants(replace(base, fingerprints=prints))]
    assert [name for name in names if "uniform" in name] == ["uniform ocean (F = 1)", "uniform over land"]
    chosen = by_name(replace(base, fingerprints=prints))["uniform over land"]
    assert chosen.fingerprints["admittance"].values.tolist() == [[[1.1, 0.02]] * 6]
    assert chosen.fingerprints["admittance"].attrs["units"] == "1"


def test_members_alone_are_those_of_the_posterior(base: Variant, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("massfit.posterior.sample.STEPS", 60)
    monkeypatch.setattr("massfit.posterior.sample.MAX_STEPS", 60)
    posterior = sample_posterior(base.phasors, base.fingerprints, settings=PLAIN, priors=Priors())
    rows = dict(single_members(posterior))
    assert list(rows) == ["load member pattern 1 alone", "load member pattern 2 alone"]
    mean = posterior.member_annual[1].mean(axis=(0, 1)) / 100.0
    np.testing.assert_allclose(rows["load member pattern 2 alone"]["mean_hpa"], mean)
    # the answer of a variant is that of a posterior drawn from it
    asked = variant_answer(base)
    np.testing.assert_array_equal(asked["mean_hpa"], posterior.draws.mean(axis=0) / 100.0)
    assert asked == answer_of(posterior.draws, posterior.converged, 6)
    assert asked["amplitude_hpa"] == pytest.approx(np.median(np.hypot(*posterior.draws.T)) / 100.0)
