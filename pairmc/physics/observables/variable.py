"""How an observable describes its variables to a result file."""

from __future__ import annotations

from typing import Literal, NamedTuple


class Variable(NamedTuple):
    """One variable of an observable.

    Parameters
    ----------
    dimensions
        Names of its dimensions.
    length_power
        Its unit as a power of the length unit; ``"-dimension"`` for a density.
    long_name
        What it is, for a reader of the file.
    """

    dimensions: tuple[str, ...]
    length_power: int | Literal["-dimension"]
    long_name: str


class Headline(NamedTuple):
    """What is named first when a result is described: one value for each row of the observable.

    Parameters
    ----------
    name
        Its name in the result file.
    variable
        Its dimension, unit and meaning.
    """

    name: str
    variable: Variable
