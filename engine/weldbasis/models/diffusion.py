"""Hydrogen leaving a plate: the series solution for a uniform charge, solved for time.

Source: J. Crank, The Mathematics of Diffusion, plane sheet with constant surface concentration.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from weldbasis.values import Floats

_TERMS = 60
_HALVINGS = 80
_LARGEST_X, _LEAST_X = 8.0, 1e-12


def mean_share(x: Floats) -> Floats:
    """Mean share of hydrogen left in a plate at x = D t / L², L the full thickness; exact to the series' end.

    For small x the short-time form 1 − 4 √(x/π) is used, which the series reaches only with very many terms.
    """
    odd = (2 * np.arange(_TERMS) + 1.0)[:, None]
    x = np.atleast_1d(np.asarray(x, np.float64))
    series = (8 / np.pi**2) * np.sum(np.exp(-((odd * np.pi) ** 2) * x) / odd**2, axis=0)
    return np.where(x < 2e-3, 1 - 4 * np.sqrt(np.maximum(x, 0.0) / np.pi), series)


def x_for_mean_share(share: Floats) -> Floats:
    """The x at which the mean share left is `share` (0 < share < 1), by halving; nan outside."""
    share = np.asarray(share, np.float64)
    low, high = np.full(share.shape, _LEAST_X), np.full(share.shape, _LARGEST_X)
    for _ in range(_HALVINGS):
        middle = np.sqrt(low * high)
        above = mean_share(middle) > share
        low, high = np.where(above, middle, low), np.where(above, high, middle)
    return np.where((share > 0) & (share < 1), np.sqrt(low * high), np.nan)


def diffusivity_mm2_s(temperature_c: Floats, constants: Mapping[str, float]) -> Floats:
    """Diffusion coefficient of hydrogen in ferritic steel, mm²/s: the smaller of two Arrhenius branches.

    The branches (trapping below, lattice above) do not meet where they are usually switched; the smaller one
    keeps the coefficient rising with temperature and the time on the long side.
    """
    kelvin = np.asarray(temperature_c, np.float64) + 273.15
    rt = constants["gas_constant_j_mol_k"] * kelvin
    low = constants["d0_low_cm2_s"] * np.exp(-constants["e_low_j_mol"] / rt)
    high = constants["d0_high_cm2_s"] * np.exp(-constants["e_high_j_mol"] / rt)
    return 100.0 * np.minimum(low, high)


def hours_to_mean_share(arguments: Mapping[str, Floats], constants: Mapping[str, float]) -> Floats:
    """Hours at `temperature` (°C) for a plate of `thickness` (mm) to fall to `share_left` of its mean hydrogen."""
    x = x_for_mean_share(arguments["share_left"])
    seconds = x * np.asarray(arguments["thickness"]) ** 2 / diffusivity_mm2_s(arguments["temperature"], constants)
    return seconds / 3600.0
