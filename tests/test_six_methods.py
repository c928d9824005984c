"""Six published preheat methods as rules, against the same formulas written out by hand with NumPy.

Formulas and limits: EN 1011-2:2001 C.3 (CET method), the hydrogen control method of AWS D1.1, Ito and Bessyo (IIW
IX-576-68), Suzuki's parameter with the logarithm of hydrogen, Yurioka et al. 1983 (CEN) and Séférian. The hand
calculation is written for known values only and shares no code with the engine.
"""

from __future__ import annotations

import numpy as np
import pytest

from bench.evaluate import WANTED, by_hand, facts_of, generated
from weldbasis.evaluate import evaluate
from weldbasis.graph import build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.values import Floats, Numbers

JOINTS = 5000


@pytest.fixture(scope="module")
def expected() -> dict[str, Floats]:
    with np.errstate(all="ignore"):
        return by_hand(generated(JOINTS))


@pytest.mark.parametrize("method", WANTED)
def test_the_rules_agree_with_the_hand_calculation(
    method: str, knowledge: Knowledge, expected: dict[str, Floats]
) -> None:
    found = evaluate(knowledge, facts_of(generated(JOINTS), knowledge), build_graph(knowledge), (method,))
    column = found.columns[method]
    assert isinstance(column, Numbers)
    inside = np.isfinite(expected[method])
    assert inside.sum() > 20, "too few joints inside the limits for the comparison to say anything"
    np.testing.assert_array_equal(np.isfinite(column.low), inside)
    np.testing.assert_allclose(column.low[inside], expected[method][inside], rtol=0, atol=0.1)
    np.testing.assert_allclose(column.high[inside], expected[method][inside], rtol=0, atol=0.1)
