"""Checks against things outside the project: heat conduction and diffusion solved numerically, published data."""

from __future__ import annotations

import h_transport_materials as htm
import numpy as np
import pytest
import sympy
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from weldbasis.knowledge import Knowledge
from weldbasis.models import MODELS
from weldbasis.models.diffusion import diffusivity_mm2_s, mean_share, x_for_share

CONSTANTS = {
    "d0_low_cm2_s": 0.12,
    "e_low_j_mol": 32700,
    "d0_high_cm2_s": 0.0014,
    "e_high_j_mol": 13400,
    "gas_constant_j_mol_k": 8.314,
}

# Crank, The Mathematics of Diffusion: mean share left and x = D t / L², solved numerically in the reference table.
CRANK = [(0.50, 0.0492), (0.20, 0.1418), (0.10, 0.2120), (0.05, 0.2823), (0.01, 0.4453)]
# Coe and Moreton 1969, Fe-0.73C: temperature in °C and overall diffusivity in cm²/s.
COE_MORETON = [(395, 7.5e-5), (350, 5.1e-5), (310, 5.1e-5), (250, 6.2e-5), (210, 6.2e-5)]


@pytest.mark.parametrize(("share", "x"), CRANK)
def test_plate_solution_meets_crank(share: float, x: float) -> None:
    assert float(x_for_share(np.array([share]), mean_share)[0]) == pytest.approx(x, abs=5e-5)


def test_plate_solution_meets_finite_differences() -> None:
    """Outside check: the diffusion equation by scipy's method of lines."""
    nodes = 201
    step = 1.0 / (nodes - 1)

    def rate(_: float, c: np.ndarray) -> np.ndarray:
        inner = np.zeros_like(c)
        inner[1:-1] = (c[2:] - 2 * c[1:-1] + c[:-2]) / step**2
        return inner

    start = np.ones(nodes)
    start[0] = start[-1] = 0.0
    found = solve_ivp(rate, (0, 0.3), start, t_eval=[0.05, 0.1, 0.2, 0.3], method="BDF", rtol=1e-6, atol=1e-9)
    means = np.trapezoid(found.y, dx=step, axis=0)
    np.testing.assert_allclose(mean_share(found.t), means, rtol=5e-3)


@pytest.mark.parametrize(("celsius", "measured_cm2_s"), COE_MORETON)
def test_diffusivity_lies_near_measurements_above_200(celsius: float, measured_cm2_s: float) -> None:
    """Outside check: Metal Science Journal 3 (1969) 209-215; within a factor of 2.1, as the scatter is known to be."""
    ours = float(diffusivity_mm2_s(np.array([celsius]), CONSTANTS)[0]) / 100
    assert 1 / 2.1 <= ours / measured_cm2_s <= 2.1


def test_diffusivity_stays_below_pure_iron() -> None:
    """Outside check: trap-free iron in h-transport-materials is faster than steel with traps, at every temperature."""
    iron = [d for d in htm.diffusivities.filter(material="iron") if d.isotope == "H"]
    assert len(iron) >= 3
    for celsius in (20.0, 100.0):
        ours = float(diffusivity_mm2_s(np.array([celsius]), CONSTANTS)[0])
        fastest = max(float(d.value(T=celsius + 273.15).to("mm**2/s").magnitude) for d in iron)
        assert ours < fastest


@given(
    st.floats(5, 100),
    st.floats(60, 350),
    st.floats(0.02, 0.8),
    st.sampled_from(["thickness", "temperature", "share_left"]),
)
def test_models_are_monotone_as_they_say(thickness: float, temperature: float, share: float, name: str) -> None:
    model = MODELS["plate-diffusion-time"]
    at = {"thickness": np.array([thickness]), "temperature": np.array([temperature]), "share_left": np.array([share])}
    more = {**at, name: at[name] * 1.05}
    before, after = float(model.evaluate(at, CONSTANTS)[0]), float(model.evaluate(more, CONSTANTS)[0])
    rises = model.arguments[name].slope == "up"
    assert after >= before if rises else after <= before


def test_cooling_formulas_have_the_order_of_the_moving_source() -> None:
    """Outside check: t8/5 of EN 1011-2 against the classical moving line and point source, usual constants of steel.

    Thick plate: T − T0 = q/(2 π λ t), so t8/5 = Q/(2 π λ) × (1/(500−T0) − 1/(800−T0)); thin plate likewise. The
    standard fits its factors to tests and lets them fall with preheat, so a factor of two is what can be expected.
    """
    conductivity, heat = 0.029, 0.0050  # W/mm·K and J/mm³·K of steel between 500 and 800 °C
    for t0 in (20.0, 100.0, 200.0):
        for q in (1000.0, 2000.0):  # J/mm
            thick = q / (2 * np.pi * conductivity) * (1 / (500 - t0) - 1 / (800 - t0))
            standard = (6700 - 5 * t0) * q / 1000 * (1 / (500 - t0) - 1 / (800 - t0))
            assert 0.5 <= standard / thick <= 2
            thin = q**2 / (4 * np.pi * conductivity * heat * 15**2) * ((1 / (500 - t0)) ** 2 - (1 / (800 - t0)) ** 2)
            printed = (
                (4300 - 4.3 * t0) * 1e5 * (q / 1000) ** 2 / 15**2 * ((1 / (500 - t0)) ** 2 - (1 / (800 - t0)) ** 2)
            )
            assert 0.5 <= printed / thin <= 2


def test_heat_input_window_is_the_cooling_formula_solved(knowledge: Knowledge) -> None:
    """Outside check: sympy solves both cooling formulas for heat input; the rule's text must equal the solution."""
    t, temperature, d, f2, f3, q = sympy.symbols("t T d F2 F3 Q", positive=True)
    cold = 1 / (500 - temperature) - 1 / (800 - temperature)
    square = 1 / (500 - temperature) ** 2 - 1 / (800 - temperature) ** 2
    thick = sympy.solve(sympy.Eq((6700 - 5 * temperature) * q * cold * f3, t), q)[0]
    thin = sympy.solve(
        sympy.Eq((4300 - sympy.Rational(43, 10) * temperature) * 10**5 * q**2 / d**2 * square * f2, t), q
    )
    point = {t: 20, temperature: 150, d: 25, f2: sympy.Rational(9, 10), f3: sympy.Rational(9, 10)}
    expected = min(float(thick.subs(point)), max(float(root.subs(point)) for root in thin))
    text = knowledge.rules["heat-input-max-member"].body["formula"]
    ours = float(
        sympy.sympify(
            text.replace("min(", "Min("),
            locals={"Min": sympy.Min, "t": t, "T": temperature, "d": d, "F2": f2, "F3": f3},
        ).subs(point)
    )
    assert ours == pytest.approx(expected, rel=1e-12)


def test_bounds_by_the_cap_on_ce_never_undercut() -> None:
    """Outside check: sympy proves CET − bound ≤ 0 and Pcm − bound ≤ 0 term by term when CE(IIW) stands at its cap."""
    names = "C Si Mn P S Cr Mo Ni Cu V B"
    c, si, mn, _, _, cr, mo, ni, cu, v, b = sympy.symbols(names, nonnegative=True)
    r = sympy.Rational
    ce = c + mn / 6 + (cr + mo + v) / 5 + (ni + cu) / 15
    cet = c + (mn + mo) / 10 + (cr + cu) / 20 + ni / 40
    pcm = c + si / 30 + (mn + cu + cr) / 20 + ni / 60 + mo / 15 + v / 10 + 5 * b
    for value, bound in (
        (cet, r(4, 10) * c + r(6, 10) * ce + r(1, 100) * cu),
        (pcm, r(7, 10) * c + r(3, 10) * ce + si / 30 + r(3, 100) * cu + mo / 150 + r(4, 100) * v + 5 * b),
    ):
        difference = sympy.Poly(sympy.expand(value - bound), c, si, mn, cr, mo, ni, cu, v, b)
        assert all(coefficient <= 0 for coefficient in difference.coeffs())
