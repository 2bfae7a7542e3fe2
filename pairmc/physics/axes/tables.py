"""Compiled tables of all orbital values of one axis at a block of coordinates.

Apart from the axes themselves, so that a command that only describes a gas compiles nothing.
"""

from __future__ import annotations

import numpy as np

from pairmc.compiled import kernel


@kernel
def fill_plane_waves(coordinates, largest, real, imaginary):
    """Tabulate cos 2πmu and sin 2πmu for |m| ≤ `largest` at a block of coordinates.

    One sine and one cosine a coordinate; the rest by the recurrence
    e^{i(m+1)φ} = e^{imφ} e^{iφ}, whose error grows by about one rounding a step.

    Parameters
    ----------
    coordinates : array (points,)
        Fractions u of the side, in [0, 1).
    largest : int
        Largest |m|.
    real, imaginary : array (2 * largest + 1, points)
        Filled; row m + largest holds quantum number m.
    """
    points = coordinates.size
    for p in range(points):
        real[largest, p] = 1.0
        imaginary[largest, p] = 0.0
    if largest == 0:
        return
    for p in range(points):
        angle = 2.0 * np.pi * coordinates[p]
        real[largest + 1, p] = np.cos(angle)
        imaginary[largest + 1, p] = np.sin(angle)
    first_real = real[largest + 1]
    first_imaginary = imaginary[largest + 1]
    for m in range(2, largest + 1):
        below_real = real[largest + m - 1]
        below_imaginary = imaginary[largest + m - 1]
        here_real = real[largest + m]
        here_imaginary = imaginary[largest + m]
        for p in range(points):
            here_real[p] = below_real[p] * first_real[p] - below_imaginary[p] * first_imaginary[p]
            here_imaginary[p] = (
                below_real[p] * first_imaginary[p] + below_imaginary[p] * first_real[p]
            )
    for m in range(1, largest + 1):
        for p in range(points):
            real[largest - m, p] = real[largest + m, p]
            imaginary[largest - m, p] = -imaginary[largest + m, p]
