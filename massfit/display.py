"""Short text and HTML of an object, for a prompt and a notebook."""

from abc import ABC, abstractmethod
from collections.abc import Mapping
from html import escape

Description = tuple[str, Mapping[str, str]]
"""A title, and what is said about the object by name."""


class Described(ABC):
    """Shows an object by what :meth:`describe` says of it.

    Examples
    --------
    >>> class Buoy(Described):
    ...     def describe(self):
    ...         return "Buoy <1>", {"depth": "4870 m"}
    >>> Buoy()
    Buoy <1>
      depth  4870 m
    >>> "<b>Buoy &lt;1&gt;</b>" in Buoy()._repr_html_()
    True
    """

    @abstractmethod
    def describe(self) -> Description:
        """Say in a few words what the object is; units stand with the numbers."""

    def __repr__(self) -> str:
        title, rows = self.describe()
        width = max((len(name) for name in rows), default=0)
        return "\n".join([title, *(f"  {name:<{width}}  {value}" for name, value in rows.items())])

    def _repr_html_(self) -> str:
        title, rows = self.describe()
        cells = "".join(f"<tr><th>{escape(name)}</th><td>{escape(value)}</td></tr>" for name, value in rows.items())
        return f"<div><b>{escape(title)}</b><table>{cells}</table></div>"


def counted(number: int, noun: str) -> str:
    """Write a number with its noun.

    Examples
    --------
    >>> counted(1, "site"), counted(0, "site")
    ('1 site', '0 sites')
    """
    return f"{number} {noun}{'' if number == 1 else 's'}"


def shown_number(value: complex, form: str = ".3g") -> str:
    """Write a number that may be complex.

    Examples
    --------
    >>> shown_number(0.25), shown_number(1 - 2.5j)
    ('0.25', '1 - 2.5i')
    """
    number = complex(value)
    if not isinstance(value, complex):
        return f"{number.real:{form}}"
    return f"{number.real:{form}} {'-' if number.imag < 0 else '+'} {abs(number.imag):{form}}i"
