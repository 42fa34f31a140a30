"""What is to be said of a site's phasor before it is compared with any other."""

from collections.abc import Sequence

from massfit.constants import PASCAL_PER_HPA

QUIET_SD = 300.0
"""Standard deviation of the reduced daily record above which a site is not called quiet, Pa (common practice)."""


def site_cautions(reduced_sd: float, models: Sequence[str]) -> list[str]:
    """Say what limits the phasor of one site.

    Parameters
    ----------
    reduced_sd : float
        Standard deviation of the reduced daily record, Pa; NaN where it is not known.
    models : sequence of str
        Circulation models that were subtracted.

    Returns
    -------
    list of str
        One sentence or more for each caution.

    Examples
    --------
    >>> [text.split(":")[0] for text in site_cautions(450.0, [])]
    ['Not quiet', 'No ocean model was subtracted']
    """
    cautions = []
    if reduced_sd > QUIET_SD:
        cautions.append(
            f"Not quiet: the reduced daily record varies by {reduced_sd / PASCAL_PER_HPA:.1f} hPa (1 sd; quiet is "
            f"below {QUIET_SD / PASCAL_PER_HPA:.0f}), so ocean dynamics that no model removes weigh on its phasor. "
            "Give a model that holds them, or see what the answer is without the site (exclude it)."
        )
    if not models:
        cautions.append(
            "No ocean model was subtracted: the annual cycle of the circulation is still in the phasor, and the "
            "covariance of its record does not hold it. Only the scales of the network's priors stand for it. Give a "
            "model that covers the site."
        )
    return cautions
