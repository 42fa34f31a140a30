"""The page docs/validation.md, made from the registry."""

from collections.abc import Sequence

from validation.registry import Group, Row, Section, sections

HEAD = """\
# Validation

Every check against something that this package did not make: published numbers, closed forms, other libraries,
slow twins and invariants. `python docs/make_validation.py` writes this page and computes every number anew (some
{seconds} s on one core), from the registry that the tests use too (`tests/validation`, with published values in
`tests/reference`). Recovery of known truth is another question: [the whole chain](theory/recovery.md),
[the posterior](theory/posterior.md).

{summary}

*allowed* is the largest difference; where only "below" stands, the difference itself has to vanish. Values that were
typed from memory say so.
"""

OPEN_DATA_NOTE = """\
Beside the count above: computed where `MASSFIT_OPEN_DATA` names the folder with the measurements.
"""

SECONDS = 15


def page(found: Sequence[tuple[Section, Sequence[tuple[Group, Sequence[Row]]]]] | None = None) -> str:
    """The text of the page; the rows of the whole registry are computed where none are given."""
    computed = compute() if found is None else found
    counted = [groups for section, groups in computed if not section.needs_open_data]
    rows = [row for groups in counted for _, own in groups for row in own]
    failed = sum(not row.passed for row in rows)
    count = f"{len(rows)} numbers in {sum(len(groups) for groups in counted)} groups"
    summary = f"{count}: **{failed} beyond what is allowed**." if failed else f"{count}, all within what is allowed."
    parts = [HEAD.format(summary=summary, seconds=SECONDS)]
    for section, groups in computed:
        parts.append(f"## {section.title}\n")
        if section.needs_open_data:
            parts.append(OPEN_DATA_NOTE)
        parts += [_group(group, own) for group, own in groups]
    return "\n".join(parts)


def split_off(text: str) -> tuple[str, str]:
    """The page without what needs the open data, and that: the sections stand last."""
    at = text.find(OPEN_DATA_NOTE)
    start = text.rfind("## ", 0, at) if at >= 0 else len(text)
    return text[:start], text[start:]


def compute() -> list[tuple[Section, list[tuple[Group, list[Row]]]]]:
    """Every row of the registry."""
    return [(section, [(group, group.rows()) for group in section.groups]) for section in sections()]


def _group(group: Group, rows: Sequence[Row]) -> str:
    lines = [
        f"### {group.title}\n",
        f"*{group.kind}*: {group.source}. Allowed: {group.reason}.\n",
        "| quantity | expected | obtained | allowed | within |",
        "|---|---|---|---|---|",
        *(_row(row) for row in rows),
    ]
    return "\n".join(lines) + "\n"


def _row(row: Row) -> str:
    within = "yes" if row.passed else "**no**"
    if row.bound:
        # the difference itself is rounding, another one on every machine
        obtained = f"below {row.tolerance:.0e}" if row.passed else f"{row.obtained:.1e}"
        return f"| {row.quantity} | 0 | {obtained} | {row.tolerance:.0e} | {within} |"
    return (
        f"| {row.quantity} | {row.expected:{row.form}} | {row.obtained:{row.form}} | {row.tolerance:.1e} | {within} |"
    )
