"""What every page is made of: its look, how it shows a figure and a table, and what it was made with."""

import base64
from collections.abc import Mapping
from typing import Any

STYLE = """
:root { color-scheme: light dark; --ink: #1c1c1c; --paper: #fff; --faint: #555; --line: #ccc; --card: #fff; }
@media (prefers-color-scheme: dark) { :root { --ink: #e6e6e6; --paper: #17191c; --faint: #aaa; --line: #444; } }
body { font: 16px/1.5 Georgia, 'Times New Roman', serif; color: var(--ink); background: var(--paper);
 margin: 2rem auto; max-width: 66rem; padding: 0 1rem; overflow-wrap: break-word; }
h1 { font-size: 1.5rem; margin: 0 0 .2rem; } h2 { font-size: 1.2rem; margin: 2.6rem 0 .5rem; }
h3 { font-size: 1rem; margin: 1.6rem 0 .4rem; } p { max-width: 46rem; } li { max-width: 44rem; }
p.answer { font-size: 1.2rem; } p.small, figcaption { font-size: .85rem; color: var(--faint); }
figcaption { max-width: 46rem; } nav ul { list-style: none; padding: 0; font-size: .9rem; }
nav li { display: inline-block; margin-right: 1rem; } a { color: inherit; }
p.stop { border: 2px solid currentColor; padding: .6rem .8rem; font-weight: bold; }
figure { margin: 1rem 0; } img { display: block; max-width: 100%; height: auto; background: var(--card);
 padding: 8px; box-sizing: border-box; border: 1px solid var(--line); }
.wide { overflow-x: auto; margin: .6rem 0; } .wide:focus-visible { outline: 2px solid currentColor; }
table { border-collapse: collapse; font: .85rem/1.35 Arial, Helvetica, sans-serif; }
th, td { padding: .18rem .6rem; border-bottom: 1px solid var(--line); text-align: right; white-space: nowrap; }
thead th { border-bottom: 1px solid var(--ink); vertical-align: bottom; white-space: normal; min-width: 3.6rem; }
th:first-child { text-align: left; padding-left: 0; } tbody th { font-weight: normal; }
.wordy th:last-child, .wordy td:last-child { text-align: left; white-space: normal; overflow-wrap: anywhere; }
dl { display: grid; grid-template-columns: max-content 1fr; gap: .1rem 1rem; font-size: .9rem; }
dt { color: var(--faint); } dd { margin: 0; overflow-wrap: anywhere; }
@media (max-width: 640px) { dl { grid-template-columns: 1fr; } dt { margin-top: .4rem; } }
@page { size: A4; margin: 15mm; }
@media print { :root { --ink: #000; --paper: #fff; --faint: #333; --line: #bbb; }
 body { margin: 0; max-width: none; padding: 0; font-size: 10.5pt; } nav { display: none; }
 .wide { overflow: visible; } table { font-size: 7.2pt; } th, td { padding: .1rem .25rem; }
 thead th { min-width: 0; }
 .many { font-size: 5.6pt; } .many th, .many td { padding: .1rem .12rem; white-space: normal; }
 figure, tr { break-inside: avoid; } h2, h3 { break-after: avoid; } img { border: 0; padding: 0; } }
"""

MACROS = """{% macro figure(name) %}
<figure><picture>
{% if name + '_column' in images %}
<source media="screen and (max-width: 640px)" srcset="{{ images[name + '_column'] }}">
{% endif %}
<img alt="{{ alternatives_text[name.split('_')[0] if name.startswith('records') else name] }}"
 src="{{ images[name] }}"></picture>
<figcaption>{{ captions[name] }}</figcaption></figure>
{% endmacro %}
{% macro table(name) %}
{% set it = tables[name] %}
<div class="wide" tabindex="0" role="region" aria-label="{{ it.title }}">
<table class="{{ 'wordy' if it.wordy }}{{ ' many' if it.head | length > 8 }}">
<thead><tr>{% for cell in it.head %}<th scope="col">{{ cell }}</th>{% endfor %}</tr></thead>
<tbody>
{% for row in it.rows %}
<tr><th scope="row">{{ row[0] }}</th>{% for cell in row[1:] %}<td>{{ cell }}</td>{% endfor %}</tr>
{% endfor %}
</tbody></table></div>
{% endmacro %}
"""


def as_data(pictures: Mapping[str, bytes]) -> dict[str, str]:
    """Write pictures as addresses that hold them.

    Parameters
    ----------
    pictures : mapping of str to bytes
        PNG images.

    Returns
    -------
    dict of str to str
    """
    return {name: "data:image/png;base64," + base64.b64encode(data).decode() for name, data in pictures.items()}


def made_with(provenance: Mapping[str, Any]) -> list[tuple[str, str]]:
    """Name what a run was made with.

    Parameters
    ----------
    provenance : mapping
        The content of `run.json`.

    Returns
    -------
    list of (str, str)
    """
    versions = ", ".join(f"{name} {value}" for name, value in provenance["versions"].items())
    facts = {
        "command": provenance["command"],
        "massfit": provenance["massfit"],
        "seed": provenance["seed"],
        "Python": provenance.get("python"),
        "machine": provenance.get("machine"),
        "processes": provenance.get("processes"),
        "spherical-harmonic transforms": provenance.get("transform_backend"),
        "polar motion": provenance.get("polar_motion"),
        "libraries": versions,
    }
    return [(name, str(value)) for name, value in facts.items() if value is not None]
