"""What `massfit fingerprint` prints: the table of the sites and what to beware of, in 80 columns."""

from massfit.display import counted
from massfit.report.pages.fingerprint_page import fingerprint_sentence
from massfit.report.words.names import fitted, padded, wrapped
from massfit.report.words.run_text import WIDTH
from massfit.results.fingerprint import FingerprintStudy, compared_degrees, degree_rows, site_rows

_NAME = 24


def fingerprint_text(study: FingerprintStudy) -> str:
    """Write the table of the sites, and the warnings.

    Parameters
    ----------
    study : FingerprintStudy

    Returns
    -------
    str
        Lines of at most 80 columns.
    """
    blocks = [
        [fitted(f"massfit: {study.network}", WIDTH), *wrapped(fingerprint_sentence(study.dataset), WIDTH)],
        _table(study),
        [line for name, reason in study.left_out.items() for line in wrapped(f"Left out: {name}: {reason}", WIDTH)],
        [line for text in study.warnings for line in wrapped(text, WIDTH, first="! ", rest="  ")],
    ]
    return "\n\n".join("\n".join(block) for block in blocks if block)


def _table(study: FingerprintStudy) -> list[str]:
    lower, upper = compared_degrees(study.dataset)
    moves = {row.site: row for row in degree_rows(study.dataset) if row.degree == lower}
    members = counted(study.dataset.sizes["member"], "load member")
    lines = [
        f"{'':{_NAME}}{'amplitude / ocean mean':>24}{'delay / days':>18}",
        f"{'site':{_NAME}}{'ratio':>12}{'spread':>12}{'delay':>9}{'spread':>9}{f'{lower} to {upper}':>12}",
    ]
    for row in site_rows(study.dataset):
        if row.kind == "mean":
            ratio_spread = "" if row.amplitude_ratio_spread is None else f"{row.amplitude_ratio_spread:.3f}"
            delay_spread = "" if row.delay_spread_days is None else f"{row.delay_spread_days:.1f}"
            change = round(-moves[row.site].ratio_change, 4) + 0.0  # a zero has no sign
            delay = round(row.delay_days, 1) + 0.0
            lines.append(
                f"{padded(row.site, _NAME - 1)} {row.amplitude_ratio:>12.3f}{ratio_spread:>12}{delay:>9.1f}"
                f"{delay_spread:>9}{change:>+12.4f}"
            )
    note = (
        f"Mean over {members}; spread: standard deviation over them; last column: what the ratio moves by from degree "
        f"{lower} to {upper}. Each member by itself is in fingerprints.csv."
    )
    return [*lines, *wrapped(note, WIDTH)]
