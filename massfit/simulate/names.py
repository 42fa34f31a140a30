"""Invented names; any likeness to a real place or model is chance."""

_SITES = (
    "Aldessa", "Brimoor", "Calvek", "Dunquill", "Eskarn", "Fennobar", "Galdrey", "Hollisk", "Ivermoss", "Jorrend",
    "Kestolm", "Lurrow", "Mivane", "Nettarn", "Orrelby", "Pelsaire", "Quenlow", "Rystad", "Sorvane", "Tuldrake",
    "Umbrosk", "Vellamere", "Wystern", "Yaldrik", "Zephrane",
)  # fmt: skip
_MODELS = ("Corvane", "Pellagor", "Sundrell", "Wexmarsh", "Yarrowdeep", "Zellotide")
_LOADS = ("Amber", "Basalt", "Chalk", "Dolomite", "Ember", "Flint", "Gravel")

_CENTRES = ("Halvorne", "Mirrowby", "Skelldane", "Tarnwick")


def site_names(count: int) -> tuple[str, ...]:
    """Site ids, unique.

    Examples
    --------
    >>> site_names(2)
    ('Aldessa', 'Brimoor')
    """
    return _names(_SITES, count)


def model_names(count: int) -> tuple[str, ...]:
    """Names of ocean models, unique."""
    return _names(_MODELS, count)


def load_names(count: int) -> tuple[str, ...]:
    """Names of load members, unique."""
    return _names(_LOADS, count)


def centre_names(count: int) -> tuple[str, ...]:
    """Names of centres that analyse satellite gravity, unique."""
    return _names(_CENTRES, count)


def _names(pool: tuple[str, ...], count: int) -> tuple[str, ...]:
    rounds = [pool[i % len(pool)] + (f"-{i // len(pool) + 1}" if i >= len(pool) else "") for i in range(count)]
    return tuple(rounds)
