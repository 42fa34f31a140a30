"""The template of the one-page report; it is filled by `page.report_page`."""

TEMPLATE = """<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta http-equiv="Content-Security-Policy"
 content="default-src 'none'; img-src data:; style-src 'unsafe-inline'">
<meta name="viewport" content="width=device-width, initial-scale=1">
<title>{{ summary.network }}: annual cycle of ocean mass</title>
<style>
body { font: 16px/1.5 Georgia, 'Times New Roman', serif; color: #1c1c1c; background: #fff; margin: 2rem auto;
 max-width: 60rem; padding: 0 1rem; }
h1 { font-size: 1.5rem; margin: 0 0 .2rem; } h2 { font-size: 1.15rem; margin: 2.2rem 0 .5rem; }
p.answer { font-size: 1.2rem; } p.small, figcaption, td.small { font-size: .85rem; color: #444; }
p.stop { border: 2px solid #1c1c1c; padding: .6rem .8rem; font-weight: bold; }
figure { margin: 1rem 0; } img { max-width: 100%; height: auto; }
table { border-collapse: collapse; font: .85rem/1.35 Arial, Helvetica, sans-serif; }
.wide { overflow-x: auto; } th, td { padding: .18rem .6rem; border-bottom: 1px solid #ddd; } td { white-space: nowrap; }
td.words { white-space: normal; }
th { text-align: right; border-bottom: 1px solid #1c1c1c; vertical-align: bottom; } td { text-align: right; }
th:first-child, td:first-child, td.words { text-align: left; }
code { font-size: .8rem; overflow-wrap: anywhere; }
@media print { body { margin: 0; max-width: none; font-size: 11pt; } figure, tr { break-inside: avoid; } }
</style>
</head>
<body>
<h1>{{ summary.network }}</h1>
<p class="small">Annual cycle of the mass of the whole ocean, from sea-floor pressure. massfit {{ version }}, seed
{{ seed }}. Results are for research.</p>
{% if not summary.convergence.converged %}
<p class="stop">The sampler did not converge: this result is not trustworthy and must not be quoted.</p>
{% endif %}
<p class="answer">{{ sentence }}</p>
<figure><img alt="{{ alt.phasor_plane }}" src="{{ images.phasor_plane }}">
<figcaption>{{ alt.phasor_plane }}</figcaption></figure>
<div class="wide"><table>
<tr><th></th><th>median</th><th>mean</th><th>sd</th><th>50 % region</th><th>95 % region</th></tr>
{% for row in quantities %}<tr><td>{{ row[0] }}</td>{% for cell in row[1:] %}<td>{{ cell }}</td>{% endfor %}</tr>
{% endfor %}</table></div>

{% if warnings %}<h2>Beware</h2><ul>{% for text in warnings %}<li>{{ text }}</li>{% endfor %}</ul>{% endif %}

<h2>What was assumed</h2>
<ul>{% for text in summary.assumptions %}<li>{{ text }}</li>{% endfor %}</ul>

<h2>Where the uncertainty comes from</h2>
<div class="wide"><table><tr><th>source</th><th>share of the variance</th></tr>
{% for name, share in shares %}<tr><td>{{ name }}</td><td>{{ share }}</td></tr>{% endfor %}</table></div>

<h2>What if</h2>
<div class="wide"><table>
<tr><th>instead</th><th>shift / sd</th><th>width ratio</th><th>amplitude / hPa</th><th>peak</th></tr>
{% for row in alternatives %}<tr><td>{{ row[0] }}</td>{% for cell in row[1:] %}<td>{{ cell }}</td>{% endfor %}</tr>
{% endfor %}</table></div>
<p class="small">{{ alternatives_note }}</p>

<h2>Does it hold</h2>
<p>{{ trust }}</p>
<figure><img alt="{{ alt.corner }}" src="{{ images.corner }}"><figcaption>{{ alt.corner }}</figcaption></figure>

<h2>The network</h2>
<figure><img alt="{{ alt.network_map }}" src="{{ images.network_map }}">
<figcaption>{{ alt.network_map }}</figcaption></figure>
<div class="wide"><table>
<tr><th>site</th><th>latitude</th><th>longitude</th><th>days</th><th>amplitude / hPa</th><th>peak</th>
<th>record sd / hPa</th><th>fingerprint ratio</th><th>delay / d</th><th>residual / sigma</th>
<th>outlier probability</th></tr>
{% for row in sites %}<tr><td>{{ row[0] }}</td>{% for cell in row[1:] %}<td>{{ cell }}</td>{% endfor %}</tr>
{% endfor %}</table></div>

{% if actions %}<h2>The records and what was taken off them</h2>
<figure><img alt="{{ alt.records }}" src="{{ images.records }}"><figcaption>{{ alt.records }}</figcaption></figure>
<div class="wide"><table>
<tr><th>deployment</th><th>daily means</th><th>what was done</th></tr>
{% for row in actions %}<tr><td>{{ row[0] }}</td><td>{{ row[1] }}</td><td class="words small">{{ row[2] }}</td></tr>
{% endfor %}</table></div>{% endif %}

<h2>How to repeat it</h2>
<p><code>{{ command }}</code></p>
<p class="small">{{ versions }}</p>
<div class="wide"><table><tr><th>input</th><th>SHA-256</th></tr>
{% for name, digest in inputs %}<tr><td>{{ name }}</td><td class="words"><code>{{ digest }}</code></td></tr>
{% endfor %}</table></div>
</body>
</html>
"""
