"""Hydrogen leaving a plate: the series solution for a uniform charge, solved for time.

Source: J. Crank, The Mathematics of Diffusion, plane sheet with a uniform start and both faces at zero.
Everywhere x = D t / L², L the full thickness.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from weldbasis.values import Floats

_ODD = range(1, 41, 2)  # terms of the series; the next adds nothing at x ≥ _SHORT
_SHORT = 2e-3  # below this x the short-time form is exact to 1e-30, and the series would need many terms
_HALVINGS = 60
_LARGEST_X, _LEAST_X = 8.0, 1e-12


def mean_share(x: Floats) -> Floats:
    """Mean share of hydrogen left in the plate, from 1 at x = 0 down to 0."""
    x = np.atleast_1d(np.asarray(x, np.float64))
    series = np.zeros_like(x)
    for odd in _ODD:  # term by term, so that a row's sum does not hang on how many rows there are
        series += np.exp(-((odd * np.pi) ** 2) * x) / odd**2
    return np.where(x < _SHORT, 1 - 4 * np.sqrt(np.maximum(x, 0.0) / np.pi), series * 8 / np.pi**2)


def centre_share(x: Floats) -> Floats:
    """Share of hydrogen left in the middle of the plate, from 1 at x = 0 down to 0."""
    x = np.atleast_1d(np.asarray(x, np.float64))
    series = np.zeros_like(x)
    for place, odd in enumerate(_ODD):
        series += (-1) ** place * np.exp(-((odd * np.pi) ** 2) * x) / odd
    return np.where(x < _SHORT, 1.0, series * 4 / np.pi)


def x_for_share(share: Floats, left: Callable[[Floats], Floats]) -> Floats:
    """The x at which `left(x)` has fallen to `share`, by halving; nan where share is not between 0 and 1."""
    wanted, back = np.unique(np.atleast_1d(np.asarray(share, np.float64)), return_inverse=True)
    low, high = np.full(wanted.shape, _LEAST_X), np.full(wanted.shape, _LARGEST_X)
    for _ in range(_HALVINGS):
        middle = np.sqrt(low * high)
        above = left(middle) > wanted
        low, high = np.where(above, middle, low), np.where(above, high, middle)
    found = np.where((wanted > 0) & (wanted < 1), np.sqrt(low * high), np.nan)
    return np.asarray(found[back], np.float64)


def diffusivity_mm2_s(temperature_c: Floats, constants: Mapping[str, float]) -> Floats:
    """Diffusion coefficient of hydrogen in ferritic steel, mm²/s: the smaller of two Arrhenius branches.

    The branches (trapping below, lattice above) do not meet where they are usually switched; the smaller one
    keeps the coefficient rising with temperature and the time on the long side.
    """
    kelvin = np.asarray(temperature_c, np.float64) + 273.15
    rt = constants["gas_constant_j_mol_k"] * kelvin
    low = constants["d0_low_cm2_s"] * np.exp(-constants["e_low_j_mol"] / rt)
    high = constants["d0_high_cm2_s"] * np.exp(-constants["e_high_j_mol"] / rt)
    return np.asarray(100.0 * np.minimum(low, high), np.float64)


def hours_to_mean_share(arguments: Mapping[str, Floats], constants: Mapping[str, float]) -> Floats:
    """Hours at `temperature` (°C) until a plate of `thickness` (mm) has a mean share `share_left` of its hydrogen."""
    return _hours(arguments, constants, mean_share)


def hours_to_centre_share(arguments: Mapping[str, Floats], constants: Mapping[str, float]) -> Floats:
    """Hours at `temperature` (°C) until the middle of a plate of `thickness` (mm) has a share `share_left` left."""
    return _hours(arguments, constants, centre_share)


def _hours(arguments: Mapping[str, Floats], constants: Mapping[str, float], left: Callable[[Floats], Floats]) -> Floats:
    x = x_for_share(arguments["share_left"], left)
    thickness = np.asarray(arguments["thickness"], np.float64)
    seconds = x * thickness**2 / diffusivity_mm2_s(arguments["temperature"], constants)
    return np.asarray(seconds / 3600.0, np.float64)
