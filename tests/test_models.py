"""Models against published tables, a numerical solution and open data on hydrogen in iron and steel."""

from __future__ import annotations

import h_transport_materials as htm
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import solve_ivp
from scipy.sparse import diags_array

from weldbasis.models import MODELS
from weldbasis.models.diffusion import centre_share, diffusivity_mm2_s, mean_share, x_for_share
from weldbasis.units import is_unit

# The two branches as the rules in kb/ hand them to the models.
BRANCHES = {
    "d0_low_cm2_s": 0.12,
    "e_low_j_mol": 32700.0,
    "d0_high_cm2_s": 0.0014,
    "e_high_j_mol": 13400.0,
    "gas_constant_j_mol_k": 8.314,
}
AVOGADRO_EV_J_MOL = 96485.33


def hours(name: str, thickness: float, temperature: float, share: float) -> float:
    arguments = {
        "thickness": np.array([thickness]),
        "temperature": np.array([temperature]),
        "share_left": np.array([share]),
    }
    return float(MODELS[name].evaluate(arguments, BRANCHES)[0])


@pytest.mark.parametrize(("share", "x"), [(0.5, 0.0492), (0.2, 0.1418), (0.1, 0.2120), (0.05, 0.2823), (0.01, 0.4453)])
def test_mean_share_is_reached_at_the_x_of_the_plate_solution(share: float, x: float) -> None:
    assert x_for_share(np.array([share]), mean_share)[0] == pytest.approx(x, abs=5e-5)


@pytest.mark.parametrize(("share", "x"), [(0.5, 0.0947), (0.2, 0.1875), (0.1, 0.2578), (0.05, 0.3280), (0.01, 0.4911)])
def test_centre_share_is_reached_at_the_x_of_the_plate_solution(share: float, x: float) -> None:
    assert x_for_share(np.array([share]), centre_share)[0] == pytest.approx(x, abs=5e-5)


@pytest.mark.parametrize(
    ("diffusivity_mm2_s", "thickness", "wanted_h"),
    [(6.2e-3, 25, 7.9), (6.2e-3, 50, 31.6), (6.0e-5, 30, 49 * 24), (9.0e-5, 30, 32.7 * 24)],
)
def test_hours_with_a_measured_coefficient(diffusivity_mm2_s: float, thickness: float, wanted_h: float) -> None:
    x = x_for_share(np.array([0.05]), mean_share)[0]
    assert x * thickness**2 / diffusivity_mm2_s / 3600 == pytest.approx(wanted_h, rel=0.01)


@pytest.mark.parametrize(
    ("temperature", "thickness", "wanted_h"),
    [(20, 25, 2741), (100, 10, 25), (100, 40, 395), (250, 25, 7.6), (250, 100, 122), (300, 20, 3.7), (350, 50, 18.6)],
)
def test_hours_of_the_reference_table(temperature: float, thickness: float, wanted_h: float) -> None:
    # At 20 and 100 °C the lower branch is the smaller one, from 250 °C on the upper; the table switches at 200 °C.
    assert hours("plate-diffusion-time", thickness, temperature, 0.05) == pytest.approx(wanted_h, rel=0.02)


@pytest.mark.parametrize("temperature", [200.0, 225.0])
def test_near_the_switch_the_longer_time_is_given(temperature: float) -> None:
    kelvin = temperature + 273.15
    upper = 100 * BRANCHES["d0_high_cm2_s"] * np.exp(-BRANCHES["e_high_j_mol"] / (8.314 * kelvin))
    with_upper = 0.2823 * 30**2 / upper / 3600
    assert hours("plate-diffusion-time", 30, temperature, 0.05) > 1.02 * with_upper


@pytest.mark.parametrize("share", [0.9, 0.5, 0.2, 0.05])
def test_shares_agree_with_finite_differences(share: float) -> None:
    cells = 201
    step = 1 / cells
    # Cell centres stand half a step from the faces, where the concentration is zero.
    main = np.full(cells, -2.0)
    main[[0, -1]] = -3.0
    matrix = diags_array([np.ones(cells - 1), main, np.ones(cells - 1)], offsets=[-1, 0, 1]).tocsr() / step**2
    at = [float(x_for_share(np.array([share]), left)[0]) for left in (mean_share, centre_share)]
    found = solve_ivp(
        lambda _, c: matrix @ c, (0, max(at)), np.ones(cells), "BDF", t_eval=sorted(at), rtol=1e-7, atol=1e-10
    ).y.T
    assert at[0] < at[1]
    assert float(found[0].mean()) == pytest.approx(share, abs=1e-3)
    assert float(found[1][cells // 2]) == pytest.approx(share, abs=1e-3)


def test_the_short_time_form_meets_the_series() -> None:
    x = np.array([1.999999e-3, 2.000001e-3])
    assert mean_share(x)[0] == pytest.approx(mean_share(x)[1], abs=1e-6)
    assert centre_share(x)[0] == pytest.approx(centre_share(x)[1], abs=1e-9)


def test_a_share_of_nothing_or_all_has_no_time() -> None:
    assert np.isnan(x_for_share(np.array([0.0, 1.0, 1.5, -0.1]), mean_share)).all()


@pytest.mark.parametrize(
    ("temperature", "measured_cm2_s"), [(350, 5.1e-5), (310, 5.1e-5), (250, 6.2e-5), (210, 6.2e-5)]
)
def test_coefficient_within_the_band_of_coe_and_moreton_when_hot(temperature: float, measured_cm2_s: float) -> None:
    found = diffusivity_mm2_s(np.array([temperature]), BRANCHES)[0] / 100
    assert measured_cm2_s / 2.1 <= found <= measured_cm2_s * 2.1


@pytest.mark.parametrize(("temperature", "measured_cm2_s"), [(60, 2.0e-7), (44, 5.2e-8)])
def test_coefficient_within_the_band_of_coe_and_moreton_when_cold(temperature: float, measured_cm2_s: float) -> None:
    found = diffusivity_mm2_s(np.array([temperature]), BRANCHES)[0] / 100
    assert measured_cm2_s / 10 <= found <= measured_cm2_s * 10


def test_coefficient_at_room_temperature_within_measured_structural_steel() -> None:
    found = diffusivity_mm2_s(np.array([20.0]), BRANCHES)[0]
    assert found == pytest.approx(1.79e-5, rel=0.01)
    assert 1.0e-5 <= found <= 1.0e-4


@pytest.mark.parametrize("temperature", [300.0, 350.0, 400.0])
def test_coefficient_within_open_data_for_iron_and_ferritic_steel(temperature: float) -> None:
    """Hydrogen in pure iron moves fastest, in tempered martensitic steel slowest; structural steel lies between."""
    kelvin = temperature + 273.15
    band = []
    for entry in htm.diffusivities:
        if str(entry.isotope).upper() != "H" or str(entry.material) not in ("iron", "rafm_steel"):
            continue
        if entry.range and entry.range[0].magnitude <= kelvin <= entry.range[1].magnitude:
            energy = entry.act_energy.to("electron_volt / particle").magnitude * AVOGADRO_EV_J_MOL
            band.append(entry.pre_exp.to("mm**2/s").magnitude * np.exp(-energy / (8.314 * kelvin)))
    assert len(band) >= 5
    found = diffusivity_mm2_s(np.array([temperature]), BRANCHES)[0]
    assert min(band) <= found <= max(band)


@given(
    st.sampled_from(sorted(MODELS)),
    st.floats(1, 300),
    st.floats(20, 450),
    st.floats(0.002, 0.95),
    st.floats(1.001, 1.5),
)
def test_every_model_is_monotone_as_it_says(
    name: str, thickness: float, temperature: float, share: float, factor: float
) -> None:
    at = {"thickness": thickness, "temperature": temperature, "share_left": share}
    limits = {"thickness": 450.0, "temperature": 675.0, "share_left": 0.99}
    model = MODELS[name]
    before = model.evaluate({key: np.array([value]) for key, value in at.items()}, BRANCHES)[0]
    for argument, described in model.arguments.items():
        moved = at | {argument: min(at[argument] * factor, limits[argument])}
        after = model.evaluate({key: np.array([value]) for key, value in moved.items()}, BRANCHES)[0]
        assert after > before if described.slope == "up" else after < before


@given(st.lists(st.floats(0.002, 0.95), min_size=2, max_size=20))
def test_many_rows_give_what_each_gives_alone(shares: list[float]) -> None:
    together = x_for_share(np.array(shares), mean_share)
    alone = [x_for_share(np.array([share]), mean_share)[0] for share in shares]
    assert np.allclose(together, alone, rtol=0, atol=0)


def test_models_state_units_that_are_units() -> None:
    for model in MODELS.values():
        units = [model.unit, *model.constants.values(), *(a.unit for a in model.arguments.values())]
        assert [unit for unit in units if not is_unit(unit)] == []
