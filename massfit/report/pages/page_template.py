"""The template of the one-page report; it is filled by `run_page.report_page`."""

from massfit.report.pages.page_parts import MACROS, STYLE

TEMPLATE = (
    MACROS
    + """<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta http-equiv="Content-Security-Policy"
 content="default-src 'none'; img-src data:; style-src 'unsafe-inline'">
<meta name="viewport" content="width=device-width, initial-scale=1">
<title>{{ summary.network }}: annual cycle of ocean mass</title>
<style>"""
    + STYLE
    + """</style>
</head>
<body>
<header>
<h1>{{ summary.network }}</h1>
<p class="small">Annual cycle of the mass of the whole ocean, from sea-floor pressure. massfit {{ version }}. Results
are for research.</p>
{% if not summary.convergence.converged %}
<p class="stop" role="alert">The sampler did not converge: this result is not trustworthy and must not be quoted.</p>
{% endif %}
</header>
<main>
<p class="answer">{{ sentence }}</p>
{{ figure('phasor_plane') }}
{{ table('quantities') }}
<nav aria-label="Contents"><ul>
{% if warnings %}<li><a href="#beware">Beware</a></li>{% endif %}
<li><a href="#assumed">What was assumed</a></li>
<li><a href="#holds">Does it hold</a></li>
<li><a href="#network">The network</a></li>
{% if tables.corrections or record_pictures %}<li><a href="#corrections">The corrections</a></li>{% endif %}
<li><a href="#fingerprint">The fingerprint</a></li>
{% if tables.actions %}<li><a href="#records">The records</a></li>{% endif %}
{% if tables.determinations %}<li><a href="#satellites">Satellite gravity</a></li>{% endif %}
<li><a href="#provenance">Where it comes from</a></li>
</ul></nav>
{% if warnings %}

<h2 id="beware">Beware</h2>
<ul>{% for text in warnings %}<li>{{ text }}</li>{% endfor %}</ul>
{% endif %}

<h2 id="assumed">What was assumed</h2>
<ul>{% for text in summary.assumptions %}<li>{{ text }}</li>{% endfor %}</ul>

<h2 id="holds">Does it hold</h2>
<p>{{ trust }}</p>
<h3>Where the uncertainty comes from</h3>
{{ table('shares') }}
{% if tables.years %}
<h3>Year by year</h3>
{{ table('years') }}
<p class="small">The answer is the mean of these cycles over the period. How much the cycle changes from year to year is
assumed (0.05 hPa per component, or as set); the last column is how much of a year's own difference from the mean the
records tell. Where it is near 0 % the year only follows the mean.</p>
{% endif %}
{% if tables.alternatives %}
<h3>What if</h3>
{{ table('alternatives') }}
<p class="small">{{ alternatives_note }}</p>
{% endif %}
{% if 'moved_site' in images %}
{{ figure('moved_site') }}
{% endif %}
<h3>Does the model fit the sites</h3>
<p>{{ summary.predictive_check.sentences | join(' ') }}</p>
{% if tables.predictive %}
{{ table('predictive') }}
<p class="small">Each row: the scatter of the site phasors, and that of networks drawn from the fitted model, in units
of what the model expects (the farthest site: over the root mean square of the others). p is the share of drawn networks
that scatter at least as much; below 0.01 or above 0.99 is called out. The scales were fitted to the same sites, so p
keeps to the middle: a value that fits says little, one at the edge says much.</p>
{% endif %}
{% if tables.calibration %}
<h3>Does it hold a known truth</h3>
<p>{{ summary.calibration.sentence }}</p>
{{ table('calibration') }}
<p class="small">Surrogates have the days, drift, noise, models and errors of this network, and a known cycle. Mean
error in standard deviations of the answer: in phase {{ '%+.2f' | format(summary.calibration.bias_sd[0]) }}, quadrature
{{ '%+.2f' | format(summary.calibration.bias_sd[1]) }}
{%- if summary.calibration.bias_error_sd[0] is not none %} (standard errors
{{ '%.2f' | format(summary.calibration.bias_error_sd[0]) }} and
{{ '%.2f' | format(summary.calibration.bias_error_sd[1]) }}){% endif %}.
{% if summary.calibration.site_square is not none %}Squared error of a site's phasor over its variance:
{{ '%.2f' | format(summary.calibration.site_square) }} on average; 1 is right, more is too sure.{% endif %}
</p>
{% endif %}
<h3>The posterior</h3>
{{ figure('corner') }}

<h2 id="network">The network</h2>
{{ figure('network_map') }}
{{ table('sites') }}
<p class="small">Days: those that the fit used; coverage: their share of the days from the first to the last. Amplitude
and peak: the site's own phasor, mean over models. Record sd: of what remains of the daily record. Residual: against the
prediction from the other sites. * has a warning.</p>
{% if tables.left_out %}{{ table('left_out') }}{% endif %}
{% if tables.corrections or record_pictures %}

<h2 id="corrections">The corrections and what each did</h2>
{% endif %}
{% if tables.corrections %}
<p>Annual cycle, in phase and quadrature, hPa, of the daily record and of every series that was taken off it. The
phasor of the site, the tides, the air pressure and the mean of the models add up to the record. A series that is zero
throughout is not listed.</p>
{{ table('corrections') }}
<p class="small">By the linear operator of the site's own fit, drift and noise included: what the phasor of the site
would hold besides, had the series been left on.</p>
{% endif %}
{% for name in record_pictures %}{{ figure(name) }}{% endfor %}

<h2 id="fingerprint">The fingerprint</h2>
{{ figure('fingerprint') }}
{{ table('fingerprint') }}
<p class="small">Ratio: amplitude at the site over that of the ocean mean, of the mean over the load members; delay:
days by which the site peaks later. Spread: standard deviation of the complex ratio over the members.
World maps and the lands each site hears: massfit fingerprint.</p>
{% if tables.actions %}

<h2 id="records">Everything done to each record</h2>
{{ table('actions') }}
{% endif %}

{% if tables.determinations %}

<h2 id="satellites">Beside satellite gravity</h2>
<p>{{ satellite_verdict }}</p>
{% if summary.comparison.warnings %}
<ul>{% for text in summary.comparison.warnings %}<li>{{ text }}</li>{% endfor %}</ul>
{% endif %}
{{ figure('satellite') }}
{{ table('determinations') }}
<p class="small">Water of the whole ocean, years of the comparison, phases of this run. p: probability of a difference
at least as large, chi-square with 2 degrees of freedom.</p>
<h3>What each choice does</h3>
{{ table('choices') }}
{% if tables.satellite_sites %}
<h3>At the recorders</h3>
{{ table('satellite_sites') }}
<p class="small">Satellites: field smoothed by 500 km at least, brought to the point by the load members. Recorder: mean
over the ocean models, less the response to air over land.</p>
{% endif %}
<h3>The geocentre</h3>
{{ table('geocentre') }}
<p class="small">Centre of figure seen from the centre of mass. The reference frame holds the loads of air and of the
ocean's circulation too; this water alone need not agree with it, least in Y.</p>
<h3>In other definitions</h3>
{{ table('definitions') }}
{% if tables.bridge %}
<h3>Across the satellites' gap</h3>
{{ table('bridge') }}
<p class="small">The network's own cycle, each calendar year by its days in the part.</p>
{% endif %}
<h3>What was done</h3>
{{ table('satellite_actions') }}
{% endif %}

<h2 id="provenance">Where it comes from, and how to repeat it</h2>
<dl>{% for name, value in made_with %}<dt>{{ name }}</dt><dd>{{ value }}</dd>{% endfor %}</dl>
<p class="small">Every setting is in run.json beside this page.</p>
{% if tables.inputs %}{{ table('inputs') }}{% endif %}
</main>
</body>
</html>
"""
)
