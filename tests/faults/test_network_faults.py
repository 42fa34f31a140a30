"""Every fault of a network file has its own exact message: place, what was found, what is allowed, what to do."""

from collections.abc import Callable
from pathlib import Path

import pytest

from massfit.errors import InputError
from massfit.io.network.network_file import read_network

Change = Callable[[str, str], None]

EXCLUDE = 'exclude = [{ from = 2015-03-01, to = 2015-03-10, reason = "anchor dragged" }]'
LOADS = 'loads = ["fields/loads.nc"]'
YEAR = "reference_year = 2016"
KNOWN = (
    "Known keys are id, latitude, longitude, depth_m, group, exclude, "
    "phasor_hpa, phasor_covariance_hpa2, model_noise_hpa2, years, subtracted, reference, deployment."
)
OUTSIDE = "Must lie inside it. Move the file, or allow paths outside (--outside; outside=True)."
WINDOW = 'Must be some. Widen the window, or leave the site out with exclude = "reason".'
UNITS = "Must be one of Pa, hPa, kPa, mbar, dbar, decibar, bar, psi, psia, mm, cm, m."

# name: (what stands in the small network of conftest.py, what replaces it, messages; "N" is its network.toml)
FAULTS = {
    "missing file": (
        '"records/a.csv"',
        '"records/aa.csv"',
        ['N:14: site[A].deployment[1].file: no file "records/aa.csv". Paths start at the network file\'s folder. '
         'Did you mean "records/a.csv"?'],
    ),
    "file in another folder": (
        '"records/b.nc"',
        '"b.nc"',
        ['N:27: site[B].deployment[1].file: no file "b.nc". Paths start at the network file\'s folder. '
         'Did you mean "records/b.nc"?'],
    ),
    "folder for a file": (
        '"records/a.csv"',
        '"records"',
        ['N:14: site[A].deployment[1].file: "records" is a folder. Must be a file.'],
    ),
    "path outside": (
        '"records/a.csv"',
        '"records/../../a.csv"',
        ['N:14: site[A].deployment[1].file: "records/../../a.csv" lies outside the folder of the network file. '
         + OUTSIDE],
    ),
    "absolute path outside": (
        '"fields/air.csv"',
        '"/air.csv"',
        [f'N:32: corrections.ocean_mean_atmosphere: "/air.csv" lies outside the folder of the network file. {OUTSIDE}'],
    ),
    "null character in a path": (
        '"records/a.csv"',
        '"records/a\\u0000.csv"',
        ["N:14: site[A].deployment[1].file: 'records/a\\x00.csv' is not a path (embedded null byte). Must be a file. "
         "Correct it."],
    ),
    "pull of the air without its ocean mean": (
        'tides = "already-removed"\nocean_mean_atmosphere = "fields/air.csv"',
        'ocean_mean_atmosphere = "already-removed"\natmosphere_load = "fields/land_air.nc"',
        ["N:32: corrections.atmosphere_load: atmosphere_load is given and the ocean-mean air pressure is already "
         "removed. The pull of the air needs the annual phasor of its ocean mean. "
         "Add ocean_mean_phasor_hpa = [in phase, quadrature].",
         'N:32: corrections.atmosphere_load: no file "fields/land_air.nc". Paths start at the network file\'s folder. '
         'Did you mean "fields/loads.nc"?'],
    ),
    "address": (
        '"records/a.csv"',
        '"https://example.org/a.csv"',
        ['N:14: site[A].deployment[1].file: "https://example.org/a.csv" is an address. Must be a file. '
         "Download it and give its path."],
    ),
    "wrong unit": (
        'units = "hPa"',
        'units = "db"',
        [f"records/a.csv: units: unknown unit 'db'. {UNITS} Did you mean 'dbar'?"],
    ),
    "duplicate site": (
        'id = "B"',
        'id = "A"',
        ['N:22: site[A].id: "A" stands twice (first on line 6). Must be unique. Rename or remove one.'],
    ),
    "one record for two sites": (
        'file = "records/b.nc"\n  drift = "linear"',
        'file = "./records/a.csv"\n  units = "hPa"\n  columns = ["date", "pressure"]\n  time_column = "date"\n'
        '  time_format = "iso"\n  delimiter = ","',
        ['N:27: site[B].deployment[1].file: "./records/a.csv" is the record of another deployment too (line 14). '
         "Must be used once. Correct the file, or state the station or variable of each."],
    ),
    "duplicate load": (
        LOADS,
        'loads = ["fields/loads.nc", "fields/loads.nc"]',
        ['N:41: fingerprint.loads[2]: "fields/loads.nc" stands twice (first on line 41). Must be unique. '
         "Rename or remove one."],
    ),
    "duplicate load member": (
        LOADS,
        'loads = ["builtin:nominal", "builtin:all"]',
        ['N:41: fingerprint.loads[2]: "nominal" stands twice (first on line 41). Must be unique. '
         "Rename or remove one."],
    ),
    "unknown key": (
        "depth_m = 4870",
        "depth = 4870",
        [f'N:9: site[A].depth: unknown key "depth". {KNOWN} Did you mean "depth_m"?'],
    ),
    "misspelled required key": (
        "latitude = -11.25",
        "lattitude = -11.25",
        [f'N:7: site[A].lattitude: unknown key "lattitude". {KNOWN} Did you mean "latitude"?'],
    ),
    "unknown section": (
        "[fingerprint]",
        "[fingerprnt]",
        ['N:40: fingerprnt: unknown key "fingerprnt". Known keys are network, corrections, fingerprint, posterior, '
         'priors, site, circulation, gravity. Did you mean "fingerprint"?'],
    ),
    "missing key": (
        "latitude = -11.25\n",
        "",
        ["N:5: site[A].latitude: the key is missing. Add it."],
    ),
    "missing reference year": (
        f"{YEAR}\n",
        "",
        ["N:1: network.reference_year: the key is missing. Must be a year. "
         "State the year from whose 1 January phases count."],
    ),
    "quoted number": (
        YEAR,
        'reference_year = "2016"',
        ['N:3: network.reference_year: the value is "2016". Must be a whole number.'],
    ),
    "latitude out of range": (
        "latitude = -11.25",
        "latitude = 95",
        ["N:7: site[A].latitude: the value is 95. Must be less than or equal to 90."],
    ),
    "longitude out of range": (
        "longitude = 205.5",
        "longitude = 405.5",
        ["N:8: site[A].longitude: the value is 405.5. Must be less than or equal to 360."],
    ),
    "site on land": (
        "longitude = 205.5",
        "longitude = 15",
        ["N:7: site[A].latitude: the site at -11.25, 15 is on land. Must be in the ocean. "
         "The nearest ocean is at -11.375, 13.625, 151 km away; check sign and order."],
    ),
    "wrong choice": (
        'drift = "linear"',
        'drift = "exponential"',
        ['N:28: site[B].deployment[1].drift: the value is "exponential". '
         "Must be 'exponential+linear', 'logarithm+linear', 'linear', 'none' or 'compare'."],
    ),
    "step that is no time": (
        'drift = "linear"',
        'steps = ["yesterday"]',
        ['N:28: site[B].deployment[1].steps[1]: the value is "yesterday". '
         "Must be a UTC time such as 2016-03-01T00:00:00Z."],
    ),
    "ramp that ends before it starts": (
        'drift = "linear"',
        "ramps = [{ from = 2015-05-03, to = 2015-05-01 }]",
        ["N:28: site[B].deployment[1].ramps[1]: the ramp runs from 2015-05-03T00:00:00 to 2015-05-01T23:59:59. "
         "Must start before it ends. Exchange the two, or declare a step with `steps`."],
    ),
    "unknown settling": (
        'drift = "linear"',
        'settling = "cut"',
        ['N:28: site[B].deployment[1].settling: the value is "cut". Must be \'model\' or \'trim\', or a number.'],
    ),
    "union of types": (
        EXCLUDE,
        "exclude = true",
        ["N:11: site[A].exclude: the value is true. Must be text in quotes, or a list."],
    ),
    "reversed exclusion": (
        "from = 2015-03-01, to = 2015-03-10",
        "from = 2015-03-10, to = 2015-03-01",
        ["N:11: site[A].exclude[1]: the interval runs from 2015-03-10T00:00:00 to 2015-03-01T23:59:59. "
         "Must start before it ends. Exchange the two."],
    ),
    "exclusion without reason": (
        ', reason = "anchor dragged"',
        "",
        ["N:11: site[A].exclude[1].reason: the key is missing. Must be text. "
         "Say why the interval is left out; every output repeats it."],
    ),
    "reversed window": (
        YEAR,
        f"{YEAR}\nstart = 2016-01-01\nend = 2015-01-01",
        ["N:4: network.start: the window starts on 2016-01-01 and ends on 2015-01-01. Must start before it ends. "
         "Exchange the two."],
    ),
    "window before the data": (
        YEAR,
        f"{YEAR}\nstart = 2020-05-01",
        ["N:1: network: the network has data on 0 days after window and exclusions. "
         "An annual cycle needs at least 180. Add records or widen the window.",
         f"N:6: site[A]: the window and the exclusions leave no data. {WINDOW}",
         f"N:22: site[B]: the window and the exclusions leave no data. {WINDOW}"],
    ),
    "under 180 days": (
        YEAR,
        f"{YEAR}\nend = 2014-06-28",
        ["N:1: network: the network has data on 179 days after window and exclusions. "
         "An annual cycle needs at least 180. Add records or widen the window."],
    ),
    "silent atmosphere": (
        'ocean_mean_atmosphere = "fields/air.csv"\n',
        "",
        ["N:30: corrections.ocean_mean_atmosphere: nothing is said about the ocean-mean air pressure. "
         'Must be a file or "already-removed" (or air_pressure instead). '
         "State it: left in, it moves the peak by weeks."],
    ),
    "silent model mean": (
        'ocean_mean = "removed"\n',
        "",
        ["N:34: circulation[Invented model].ocean_mean: the key is missing. "
         'Must be "removed" or the file of the model\'s own whole-ocean mean. '
         "State it: a mean that is left in holds part of the answer."],
    ),
    "silent air-pressure forcing": (
        'air_pressure = "not-forced"\n',
        "",
        ["N:34: circulation[Invented model].air_pressure: the key is missing. "
         'Must be "not-forced", "forced-included" or "forced-excluded". '
         "State whether air pressure drives the model and its load is in the bottom pressure."],
    ),
    "a model that is partly taken": (
        'air_pressure = "not-forced"\n',
        'air_pressure = "not-forced"\npartial = "trim"\n',
        ['N:39: circulation[Invented model].partial: the value is "trim". Must be \'missing\' or \'cut\'.'],
    ),
    "forcing without air pressure": (
        '"not-forced"',
        '"forced-excluded"',
        ['N:38: circulation[Invented model].air_pressure: the value is "forced-excluded" and [corrections] has no '
         "air_pressure. Such a model needs the air pressure at each site. Add the file of surface air pressure."],
    ),
    "air pressure twice": (
        'tides = "already-removed"',
        'air_pressure = "fields/model.nc"',
        ["N:32: corrections.ocean_mean_atmosphere: both air_pressure and ocean_mean_atmosphere are given. "
         "air_pressure stands for both of the others. Drop ocean_mean_atmosphere or it.",
         "fields/model.nc: variable: no variable has the wanted dimensions; there are bottom_pressure (time, site). "
         "Must be over (time, lat, lon)."],
    ),
    "phasor beside the file": (
        'tides = "already-removed"',
        "ocean_mean_phasor_hpa = [0.1, 0.2]",
        ["N:31: corrections.ocean_mean_phasor_hpa: the phasor of the ocean-mean air pressure is given beside a file of "
         'it. Belongs to ocean_mean_atmosphere = "already-removed" only. Remove it.'],
    ),
    "pole motion counted twice": (
        LOADS,
        "rotational_feedback = true",
        ['N:41: fingerprint.rotational_feedback: the value is true and pole_tide is "observed". '
         "Observed polar motion already holds the response to the mass exchange, so it would count twice. "
         "Set it to false."],
    ),
    "pole motion counted twice at a site reduced elsewhere": (
        f'[[circulation]]\nname = "Invented model"\nfile = "fields/model.nc"\nocean_mean = "removed"\n'
        f'air_pressure = "not-forced"\n\n[fingerprint]\n{LOADS}',
        'pole_tide = "none"\n[[site]]\nid = "C"\nlatitude = 0.0\nlongitude = 200.0\nphasor_hpa = [0.1, 0.8]\n'
        'phasor_covariance_hpa2 = [[0.01, 0.0], [0.0, 0.01]]\nyears = [2014, 2016]\nsubtracted = []\n'
        "[fingerprint]\nrotational_feedback = true",
        ["N:44: fingerprint.rotational_feedback: the value is true and site C was reduced elsewhere, with the pole "
         "tide taken off. Observed polar motion already holds the response to the mass exchange, so it would count "
         "twice. Set it to false."],
    ),
    "no number of perturbed loads": (
        LOADS,
        'loads = ["fields/loads.nc", "perturbed:0", "perturbed:many"]',
        ['N:41: fingerprint.loads[2]: the value is "perturbed:0". Must be a number of members from 1 to 100. '
         'Write "perturbed:16".',
         'N:41: fingerprint.loads[3]: the value is "perturbed:many". Must be a number of members from 1 to 100. '
         'Write "perturbed:16".'],
    ),
    "perturbed loads asked for twice": (
        LOADS,
        'loads = ["fields/loads.nc", "perturbed:2", "perturbed:3"]',
        ['N:41: fingerprint.loads[3]: "perturbed:3" stands beside "perturbed:2". Perturbed members are asked for once. '
         "Add up the two numbers."],
    ),
    "misspelt kind of load": (
        LOADS,
        'loads = ["peturbed:2", "bultin:all"]',
        ['N:41: fingerprint.loads[1]: there is no kind of load "peturbed:". Did you mean "perturbed:2"?',
         'N:41: fingerprint.loads[2]: there is no kind of load "bultin:". Did you mean "builtin:all"?'],
    ),
    "Earth model in capitals": (
        LOADS,
        'earth_model = "PREM"',
        ['N:41: fingerprint.earth_model: the value is "PREM". Must be "prem", or a file. Write "prem".'],
    ),
    "vapour on a day that does not exist": (
        LOADS,
        f'water_vapour_peak = "02-30"\n{LOADS}',
        ["N:41: fingerprint.water_vapour_peak: there is no '02-30' in 2016. Must be a date MM-DD."],
    ),
    "unknown built-in load": (
        LOADS,
        'loads = ["builtin:al"]',
        ["N:41: fingerprint.loads[1]: there is no such built-in load. "
         "Known are nominal, snow-rich, rain-rich, strong-monsoon, slow-rivers, wide-basins, large-ice and all."],
    ),
    "no loads": (
        LOADS,
        "loads = []",
        ["N:41: fingerprint.loads: the value is []. Must be a longer list."],
    ),
    "infinite number": (
        LOADS,
        "water_vapour_kg = inf",
        ["N:41: fingerprint.water_vapour_kg: the value is inf. Must be a finite number."],
    ),
    "day of no month": (
        LOADS,
        'water_vapour_peak = "15 July"',
        ['N:41: fingerprint.water_vapour_peak: the value is "15 July". Must be a month and a day, "07-15".'],
    ),
    "table for a list of tables": (
        "[[circulation]]",
        "[circulation]",
        ['N:34: circulation: the value is {"name": "Invented model", "file": "fields/model.nc", "oc... '
         "Must be a list of tables, [[circulation]]. Write [[circulation]]."],
    ),
    "site without deployment": (
        '  [[site.deployment]]\n  file = "records/b.nc"\n  drift = "linear"\n',
        "",
        ["N:21: site[B]: the site has no deployment. Must be at least one. Add a [[site.deployment]]."],
    ),
    "series of another shape": (
        '"fields/air.csv"',
        '"fields/model.nc"',
        ["fields/model.nc: variable: no variable has the wanted dimensions; there are bottom_pressure (time, site). "
         "Must be over (time)."],
    ),
    "nested gravity": (
        "[fingerprint]",
        "[gravity]\nfields = { a = 1 }\n[fingerprint]",
        ['N:41: gravity.fields: the value is {"a": 1}. Must be a list.'],
    ),
    "syntax error reported alone": (
        'name = "Two invented sites"\nreference_year = 2016',
        'name = "Two invented sites\nreference_year = "2016"',
        ["N:2: Illegal character '\\n' at column 27. A network file is TOML 1.0. Correct this line."],
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", FAULTS)
def test_message(name: str, network_folder: Path, change: Change) -> None:
    old, new, expected = FAULTS[name]
    change(old, new)
    with pytest.raises(InputError) as raised:
        read_network(network_folder)
    source = str(network_folder / "network.toml")
    assert str(raised.value).replace(source, "N").splitlines() == expected


def test_the_untouched_network_has_no_fault(network_folder: Path) -> None:
    assert read_network(network_folder).warnings == ()


def test_all_faults_at_once(network_folder: Path, change: Change) -> None:
    change("latitude = 5.0", "latitude = 500.0")
    change("longitude = 205.5", "longitude = 15")
    change('units = "hPa"', 'units = "db"')
    change('ocean_mean = "removed"', 'ocean_mean = "fields/none.csv"')
    change(LOADS, "max_degree = 5\nrotation = 1")
    (network_folder / "fields/air.csv").write_text("time,value\n2014-01-01,1\n")
    with pytest.raises(InputError) as raised:
        read_network(network_folder)
    found = [(fault.source.rsplit("/", 1)[-1], fault.name, fault.line) for fault in raised.value.faults]
    assert found == [
        ("network.toml", "site[A].latitude", 7),
        ("network.toml", "site[B].latitude", 23),
        ("network.toml", "circulation[Invented model].ocean_mean", 37),
        ("network.toml", "fingerprint.max_degree", 41),
        ("network.toml", "fingerprint.rotation", 42),
        ("a.csv", "units", None),
        ("air.csv", "units", None),
    ]


def test_a_symbolic_link_out_of_the_folder_is_outside(network_folder: Path) -> None:
    record = network_folder / "records/a.csv"
    record.rename(network_folder.parent / "elsewhere.csv")
    record.symlink_to(network_folder.parent / "elsewhere.csv")
    with pytest.raises(InputError, match=r'"records/a\.csv" lies outside'):
        read_network(network_folder)
    assert len(read_network(network_folder, outside=True).records) == 2


def test_addresses_are_refused_even_when_outside_is_allowed(network_folder: Path, change: Change) -> None:
    change('"fields/model.nc"', '"s3://bucket/model.nc"')
    with pytest.raises(InputError, match="is an address"):
        read_network(network_folder, outside=True)


def test_no_network_file(tmp_path: Path) -> None:
    (tmp_path / "net.toml").write_text("")
    with pytest.raises(InputError) as raised:
        read_network(tmp_path)
    expected = f"{tmp_path}/network.toml: there is no such file. Must be a network file or its folder. "
    assert str(raised.value) == expected + f'Did you mean "{tmp_path}/net.toml"?'


def test_a_network_file_that_is_not_text(tmp_path: Path) -> None:
    (tmp_path / "network.toml").write_bytes(b"[network]\nname = '\xff'\n")
    with pytest.raises(InputError, match=r"network\.toml:2: byte 0xff is not UTF-8\. A network file is UTF-8 text\."):
        read_network(tmp_path)


def test_an_empty_network_file(tmp_path: Path) -> None:
    (tmp_path / "network.toml").write_text("")
    with pytest.raises(InputError) as raised:
        read_network(tmp_path)
    assert [fault.name for fault in raised.value.faults] == [
        "network.name", "network.reference_year", "site", "corrections.ocean_mean_atmosphere",
    ]  # fmt: skip


def test_the_short_network_is_whole_at_180_days(network_folder: Path, change: Change) -> None:
    change(YEAR, f"{YEAR}\nend = 2014-06-29")  # one day more than in "under 180 days"
    warnings = read_network(network_folder).warnings
    assert warnings[0] == (
        "Site A has 180 days of data (0.49 years): drift and annual cycle part only beyond about 1.5 years, "
        "so its uncertainty is wide. A longer record narrows it."
    )
    assert len(warnings) == 2
