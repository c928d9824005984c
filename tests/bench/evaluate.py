"""Decide 100,000 generated joints, against a hand-written NumPy script of the same formulas, in one process.

Run: python tests/bench/evaluate.py [joints]. Prints seconds of both (best of five) and their ratio; the goal is at
most 5. What is compared: the CET method inside and at its limits, hydrogen control, Ito and Bessyo, Suzuki, CEN and
Seferian, with all carbon equivalents, restraint, hydrogen scales and validity limits. Both must agree before they are
timed, so this is an independent calculation of the six methods too.
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable

import numpy as np

from weldbasis.evaluate import evaluate
from weldbasis.facts import Facts
from weldbasis.graph import build_graph
from weldbasis.knowledge import Knowledge
from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import kb_folder
from weldbasis.values import Column, Floats, exact_numbers, level_sets, mask_of

WANTED = (
    "preheat_cet",
    "preheat_cet_raised",
    "preheat_hydrogen_control",
    "preheat_ito_bessyo",
    "preheat_suzuki",
    "preheat_cen",
    "preheat_seferian",
)
ELEMENTS = {
    "carbon": (0.06, 0.22),
    "silicon": (0.1, 0.5),
    "manganese": (0.6, 1.6),
    "chromium": (0, 0.3),
    "molybdenum": (0, 0.1),
    "nickel": (0, 0.4),
    "copper": (0, 0.4),
    "vanadium": (0, 0.06),
    "niobium": (0, 0.04),
    "titanium": (0, 0.02),
    "boron": (0, 0.0004),
}


def generated(joints: int) -> dict[str, Floats]:
    """Known values of as many joints of two parts: joint values, and member values of shape (joints, 2)."""
    rng = np.random.default_rng(3)
    data = {name: rng.uniform(low, high, (joints, 2)) for name, (low, high) in ELEMENTS.items()}
    data |= {
        "member_thickness": rng.uniform(10, 60, (joints, 2)),
        "yield_strength": rng.uniform(235, 460, (joints, 2)),
        "hydrogen": rng.uniform(2, 10, joints),
        "heat_input": rng.uniform(0.8, 3, joints),
        "ambient": rng.uniform(5, 25, joints),
        "restraint": rng.integers(0, 3, joints).astype(float),
    }
    return data


def facts_of(data: dict[str, Floats], knowledge: Knowledge) -> Facts:
    """The same as columns; the weld metal is the third member, of which nothing is known."""
    joints = len(data["hydrogen"])
    given: dict[str, Column] = {}
    for name in (*ELEMENTS, "member_thickness", "yield_strength"):
        column = np.full((joints, 3), np.nan)
        column[:, :2] = data[name]
        given[name] = exact_numbers(column.ravel())
    for name in ("hydrogen", "heat_input", "ambient"):
        given[name] = exact_numbers(data[name])
    given["preheat_step"] = exact_numbers(np.full(joints, 10.0))
    given["restraint"] = level_sets(np.uint64(1) << data["restraint"].astype(np.uint64))

    def level(name: str, value: str, rows: int) -> None:
        given[name] = level_sets(np.full(rows, mask_of([value], knowledge.quantities[name].order), np.uint64))

    for name, value in (("humidity", "dry"), ("form", "butt"), ("process", "136"), ("preheat_route", "prequalified")):
        level(name, value, joints)
    for name in knowledge.quantities:
        if name.startswith("contract_"):
            level(name, "no", joints)
    level("steel_family", "c-mn", joints * 3)
    roles = np.tile(np.array([1, 1, 2], np.uint64), joints)
    given["member_role"] = level_sets(roles)
    given["member_number"] = exact_numbers(np.tile([1.0, 2.0, 3.0], joints))
    return Facts(
        tuple(map(str, range(joints))), ("a", "b", "weld metal") * joints, np.repeat(np.arange(joints), 3), given
    )


def by_hand(data: dict[str, Floats]) -> dict[str, Floats]:
    """The same decisions as a script for known values only; nan where a method is outside its limits."""
    c, si, mn, cr, mo, ni, cu, v, nb, ti, b = (data[name] for name in ELEMENTS)
    hd, q, d = data["hydrogen"], data["heat_input"], data["member_thickness"].max(axis=1)
    d2, hd2, q2 = d[:, None], hd[:, None], q[:, None]
    pcm = c + si / 30 + (mn + cu + cr) / 20 + ni / 60 + mo / 15 + v / 10 + 5 * b
    cet = c + (mn + mo) / 10 + (cr + cu) / 20 + ni / 40
    cen = c + (0.75 + 0.25 * np.tanh(20 * (c - 0.12))) * (
        si / 24 + mn / 6 + cu / 15 + ni / 20 + (cr + mo + nb + v) / 5 + 5 * b
    )
    hj = np.maximum(0, np.maximum(0.64 * hd - 0.93, 0.67 * hd - 0.8))
    k = np.array([20.0, 40.0, 69.0])[data["restraint"].astype(int)] * d
    kn = k * 9.80665
    top = (
        (c <= 0.32) & (si <= 0.8) & (mn <= 1.9) & (cr <= 1.5) & (cu <= 0.7) & (mo <= 0.75) & (nb <= 0.06) & (ni <= 2.5)
    )
    top &= (ti <= 0.12) & (v <= 0.18) & (b <= 0.005) & (data["yield_strength"] <= 1000)
    strict = (
        top
        & (c >= 0.05)
        & (mn >= 0.5)
        & (cet >= 0.2)
        & (cet <= 0.5)
        & (d2 >= 10)
        & (d2 <= 90)
        & (hd2 >= 1)
        & (hd2 <= 20)
    )
    strict &= (q2 >= 0.5) & (q2 <= 4)
    plain = 697 * cet + 160 * np.tanh(d2 / 35) + 62 * hd2**0.35 + (53 * cet - 32) * q2 - 328
    preheat_cet = np.where(strict, plain, np.nan).max(axis=1)
    raised = np.maximum(0.2, cet + np.maximum(0, 0.05 - c) + np.maximum(0, 0.5 - mn) / 10)
    edge = 697 * raised + 160 * np.tanh(np.maximum(d2, 10) / 35) + 62 * np.maximum(hd2, 1) ** 0.35
    edge += (53 * raised - 32) * np.minimum(q2, 4) - 328
    wide = top & (raised <= 0.5) & (d2 <= 90) & (hd2 <= 20) & (q2 >= 0.5)
    preheat_raised = np.where(wide, edge, np.nan).max(axis=1)
    ib = (
        (c >= 0.07)
        & (c <= 0.22)
        & (si <= 0.6)
        & (mn >= 0.4)
        & (mn <= 1.4)
        & (cu <= 0.5)
        & (ni <= 1.2)
        & (cr <= 1.2)
        & (mo <= 0.7)
    )
    ib &= (
        (v <= 0.12)
        & (nb <= 0.04)
        & (ti <= 0.05)
        & (b <= 0.005)
        & ((d >= 19) & (d <= 50) & (kn >= 4903) & (kn <= 32362))[:, None]
    )
    it = np.where(
        ib & ((hj >= 1) & (hj <= 5) & (q >= 1.7) & (q <= 3))[:, None],
        1440 * (pcm + (hj / 60 + k / 40000)[:, None]) - 392,
        np.nan,
    )
    su = np.where(ib & (hd2 <= 8.7), 1600 * (pcm + (0.075 * np.log10(hd) + k / 40000)[:, None]) - 408, np.nan)
    sy = data["yield_strength"] / 9.80665
    stress = np.minimum(0.05 * k[:, None], sy + 0.0025 * (k[:, None] - 20 * sy))
    ci = cen + 0.15 * np.log10(hj)[:, None] + 0.30 * np.log10(0.017 * 4 * stress)
    t = np.where((ci >= 0.5) & (ci <= 0.8), np.exp(67.6 * ci**3 - 182.0 * ci**2 + 163.8 * ci - 41.0), np.nan)
    ta = data["ambient"][:, None]
    ce = ta + (100 - ta) * np.exp(0.010638 * t / d2) - 1000 * q2 / (d2 * np.sqrt(4 * 3.14159265 * 0.04 * 0.0047 * t))
    ct = (360 * c + 40 * (mn + cr) + 20 * ni + 28 * mo) / 360 * (1 + 0.005 * d2)
    se = np.where(ct >= 0.25, 350 * np.sqrt(ct - 0.25), np.nan)
    return {
        "preheat_cet": preheat_cet,
        "preheat_cet_raised": preheat_raised,
        "preheat_ito_bessyo": it.max(axis=1),
        "preheat_suzuki": su.max(axis=1),
        "preheat_cen": ce.max(axis=1),
        "preheat_seferian": np.fmax(se[:, 0], se[:, 1]),
        "preheat_hydrogen_control": _control(data, pcm, d),
    }


def _control(data: dict[str, Floats], pcm: Floats, d: Floats) -> Floats:
    """Hydrogen control: the letter by index and by table, then a row by restraint and thickness."""
    hd = data["hydrogen"][:, None]
    index = np.searchsorted([3.0, 3.5, 4.0, 4.5, 5.0, 5.5, 7.0], 12 * pcm + np.log10(hd), side="left")
    level = np.searchsorted([5.0, 10.0], hd, side="left")
    table = np.searchsorted([0.18, 0.23, 0.28, 0.33, 0.38], pcm, side="right")
    letter = np.maximum(index, table + level).max(axis=1)
    band = np.select([d < 10, d <= 20, d <= 38, d <= 75], [0, 1, 2, 3], 4)
    grid = np.array(
        [
            [
                [0, 0, 0, 0, 60, 140, 150],
                [0, 0, 20, 60, 100, 140, 150],
                [0, 0, 20, 80, 110, 140, 150],
                [20, 20, 40, 95, 120, 140, 150],
                [20, 20, 40, 95, 120, 140, 150],
            ],
            [
                [0, 0, 0, 0, 70, 140, 160],
                [0, 0, 20, 80, 115, 145, 160],
                [0, 20, 75, 110, 140, 150, 160],
                [20, 80, 110, 130, 150, 150, 160],
                [95, 120, 140, 150, 160, 160, 160],
            ],
            [
                [0, 0, 0, 40, 110, 150, 160],
                [0, 20, 65, 105, 140, 160, 160],
                [20, 85, 115, 140, 150, 160, 160],
                [115, 130, 150, 150, 160, 160, 160],
                [115, 130, 150, 150, 160, 160, 160],
            ],
        ],
        float,
    )
    outside = (table == 5).any(axis=1) | (index == 7).any(axis=1)
    return np.where(outside, np.nan, grid[data["restraint"].astype(int), band, np.minimum(letter, 6)])


def best(work: Callable[[], object], times: int = 5) -> float:
    """Least seconds of several runs."""
    seconds = []
    for _ in range(times):
        start = time.perf_counter()
        work()
        seconds.append(time.perf_counter() - start)
    return min(seconds)


def main() -> None:
    """Check that both agree, then time both."""
    joints = int(sys.argv[1]) if len(sys.argv) > 1 else 100_000
    knowledge = load_knowledge(kb_folder(), with_cases=False)
    graph = build_graph(knowledge)
    data = generated(joints)
    facts = facts_of(data, knowledge)
    with np.errstate(all="ignore"):
        expected = by_hand(data)
        found = evaluate(knowledge, facts, graph, WANTED).columns
        for name in WANTED:
            column = found[name]
            np.testing.assert_allclose(column.low, expected[name], rtol=1e-9, atol=1e-6, err_msg=name)  # type: ignore[union-attr]
        ours = best(lambda: evaluate(knowledge, facts, graph, WANTED))
        hand = best(lambda: by_hand(data))
        everything = best(lambda: evaluate(knowledge, facts, graph), 2)
    print(f"{joints} joints: rules {ours:.2f} s, by hand {hand:.2f} s, ratio {ours / hand:.1f} (goal at most 5)")
    print(f"all {len(knowledge.rules)} rules: {everything:.2f} s")


if __name__ == "__main__":
    main()
