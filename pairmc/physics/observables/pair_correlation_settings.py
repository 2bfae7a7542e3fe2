"""What a user may choose about the pair correlation."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Settings:
    """Settings of the pair correlation.

    Parameters
    ----------
    bins
        Bins of the separation, from zero to half the shortest side.
    """

    bins: int = 80
