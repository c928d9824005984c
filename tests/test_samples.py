"""Samples to sets: the stored figures against the noncentral t and published tables; bounds, outliers, uncertainty."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from test_project import number, origin, project_of, with_steel
from weldbasis.knowledge import Knowledge, Sampling
from weldbasis.project.samples import outlier_of, outward, tolerance_bounds
from weldbasis.ranges import Range


@pytest.fixture(scope="module")
def method(knowledge: Knowledge) -> Sampling:
    assert knowledge.sampling is not None
    return knowledge.sampling


def points(*values: float) -> list[Range]:
    return [Range(value, value) for value in values]


def numbered(*values: float) -> list[tuple[int, Range]]:
    return list(enumerate(points(*values), start=1))


def noncentral(count: int, content: float, confidence: float) -> float:
    """The one-sided tolerance factor of a normal population with unknown mean and spread."""
    root = math.sqrt(count)
    return float(stats.nct.ppf(confidence, count - 1, stats.norm.ppf(content) * root)) / root


def test_factors_are_quantiles_of_the_noncentral_t(method: Sampling) -> None:
    for count, factor in method.factors:
        exact = noncentral(count, method.content, method.confidence)
        assert exact <= factor + 1e-6, "rounded up, so that a bound is never less than it says"
        assert factor - exact < 0.0011


# Factors printed in ISO 16269-6 and in the NIST/SEMATECH handbook, recalled: count, content, confidence, factor.
PRINTED = [
    (43, 0.90, 0.99, 1.8740),  # by the noncentral t; the handbook's own approximation gives 1.8752
    (3, 0.95, 0.95, 7.656),
    (4, 0.95, 0.95, 5.144),
    (5, 0.95, 0.95, 4.203),
    (10, 0.95, 0.95, 2.911),
    (20, 0.95, 0.95, 2.396),
    (50, 0.95, 0.95, 2.065),
    (3, 0.90, 0.95, 6.155),
    (10, 0.90, 0.95, 2.355),
    (5, 0.90, 0.90, 2.742),
    (10, 0.90, 0.90, 2.066),
]


@pytest.mark.parametrize(("count", "content", "confidence", "factor"), PRINTED)
def test_the_formula_gives_printed_factors(
    count: int, content: float, confidence: float, factor: float, method: Sampling
) -> None:
    assert noncentral(count, content, confidence) == pytest.approx(factor, abs=6e-4)
    if (content, confidence) == (method.content, method.confidence):
        assert method.factor(count) == pytest.approx(factor, abs=1.1e-3)


def test_critical_values_follow_from_students_t(method: Sampling) -> None:
    for count, critical in method.critical_values:
        t = stats.t.ppf(1 - method.significance / (2 * count), count - 2)
        exact = (count - 1) / math.sqrt(count) * math.sqrt(t * t / (count - 2 + t * t))
        assert critical == pytest.approx(exact, abs=6e-4)
    # Printed, two-sided at 5 %, recalled.
    for count, printed in ((4, 1.481), (5, 1.715), (6, 1.887), (10, 2.290)):
        assert method.critical(count) == pytest.approx(printed, abs=1.1e-3)


def test_between_listed_counts_the_safe_figure_counts(method: Sampling) -> None:
    assert method.factor(32) == method.factor(30) > method.factor(35)
    assert method.factor(10_000) == method.factors[-1][1]
    assert method.critical(method.critical_values[0][0] - 1) is None


def test_a_share_of_the_steel_lies_below_the_bound_with_the_confidence(method: Sampling) -> None:
    """Drawn from a normal steel, the bound holds for 95 % of it about 95 times in a hundred."""
    rng = np.random.default_rng(7)
    below = stats.norm.ppf(method.content)
    for count in (3, 5, 12):
        drawn = rng.normal(0.2, 0.02, (4_000, count))
        held = [tolerance_bounds(points(*row), 0.0, method).high >= 0.2 + 0.02 * below for row in drawn]
        assert np.mean(held) == pytest.approx(method.confidence, abs=0.012)


content = st.floats(0.0, 0.5)
spans = st.tuples(content, content).map(lambda pair: Range(min(pair), max(pair)))


@given(values=st.lists(spans, min_size=3, max_size=14), figure=st.sampled_from([0.0, 0.001, 0.01]))
def test_bounds_hold_the_samples_and_every_case_of_them(
    values: list[Range], figure: float, knowledge: Knowledge
) -> None:
    method = knowledge.sampling
    assert method is not None
    found = tolerance_bounds(values, figure, method)
    assert 0.0 <= found.low <= min(value.low for value in values)
    assert found.high >= max(value.high for value in values)
    rng = np.random.default_rng(1)
    for _ in range(20):
        case = [Range(x, x) for v in values for x in [float(rng.uniform(v.low, v.high))]]
        one = tolerance_bounds(case, figure, method)
        assert found.low <= one.low + 1e-12
        assert one.high <= found.high + 1e-12


def test_equal_reports_do_not_pretend_to_no_spread(method: Sampling) -> None:
    found = tolerance_bounds(points(0.14, 0.14, 0.14, 0.14), 0.01, method)
    assert found.high == pytest.approx(0.14 + 5.144 * 0.01 / math.sqrt(12))
    assert found.low < 0.14


OUTLIERS: list[tuple[Sequence[float], int | None]] = [
    ((0.15, 0.16, 0.15, 0.14, 0.23, 0.15), 5),
    ((0.15, 0.16, 0.15, 0.14, 0.17, 0.15), None),
    ((0.02, 0.02, 0.02, 0.03), None),  # one step of the last figure is rounding
    ((0.02, 0.02, 0.02, 0.09), 4),
    ((0.02, 0.02, 0.09), None),  # three cannot tell
    ((0.02, 0.02, 0.02, 0.02), None),
    ((0.19, 0.05, 0.20, 0.19, 0.21), 2),
]


@pytest.mark.parametrize(("values", "sample"), OUTLIERS)
def test_outliers(values: Sequence[float], sample: int | None, method: Sampling) -> None:
    found = outlier_of(numbered(*values), 0.01, method)
    assert (found.sample if found else None) == sample


def test_bounds_are_rounded_outward() -> None:
    assert outward(Range(0.1234, 0.1236), 3) == Range(0.123, 0.124)
    assert outward(Range(0.12, 0.25), 3) == Range(0.12, 0.25)


ERA = "era: open-hearth-early, "
# Mean 0.14, standard deviation 0.008165: 0.14 ± 5.144 × 0.008165.
FOUR = "samples: [{C: 0.13}, {C: 0.14}, {C: 0.14}, {C: 0.15}]"
SAID = [
    (ERA + FOUR, "carbon", (0.097, 0.183), "4 samples 0.13 to 0.15 %; with these C is taken up to 0.183 % (95 %"),
    (ERA + FOUR + ", sample_uncertainty: {C: 0.01}", "carbon", (0.087, 0.193), "4 samples 0.13 to 0.15 %; with these"),
    (ERA + "samples: [{C: 0.2}, {C: 0.3}, {C: 0.1}]", "carbon", (0.0, 0.35), "3 samples 0.1 to 0.3 %; with these C is"),
    (ERA + "samples: [{C: 0.2}, {C: 0.5}, {C: 0.1}]", "carbon", (0.0, 0.5), "3 samples 0.1 to 0.5 %; with these C is"),
    ("grade: S355J2, samples: [{C: 0.2}, {C: 0.1}, {C: 0.1}]", "carbon", (0.0, 0.2), "3 samples 0.1 to 0.2 %; with"),
    ("samples: [{C: 0.2}, {C: 0.9}, {C: 0.1}]", "carbon", (0.0, 1.2), "3 samples 0.1 to 0.9 %; with these C is taken"),
    (ERA + "samples: [{C: 0.31}], sample_uncertainty: {C: 0.02}", "carbon", (0.12, 0.33), "1 sample, joined with"),
    (
        ERA + "sample_place: centre, samples: [{S: 0.06}, {S: 0.06}]",
        "sulphur",
        (0.02 / 1.5, 0.06),
        "2 samples, joined with the era's typical range, less outside the middle",
    ),
    (ERA + "sample_place: surface, samples: [{S: 0.06}, {S: 0.06}]", "sulphur", (0.02, 0.06), "2 samples, joined"),
]


@pytest.mark.parametrize(("steel", "element", "ends", "text"), SAID)
def test_what_samples_come_to(
    steel: str, element: str, ends: tuple[float, float], text: str, tmp_path: Path, knowledge: Knowledge
) -> None:
    project = project_of(tmp_path, knowledge, with_steel(steel))
    assert number(project, element) == pytest.approx(ends)
    assert origin(project, element).text.startswith(text)


def test_an_outlier_is_named_and_counts(tmp_path: Path, knowledge: Knowledge) -> None:
    carbon = (0.15, 0.16, 0.15, 0.14, 0.23, 0.15)
    steel = ERA + f"samples: [{', '.join(f'{{C: {value}}}' for value in carbon)}]"
    project = project_of(tmp_path, knowledge, with_steel(steel))
    assert number(project, "outlying_samples") == (1, 1)
    assert "sample 5 stands apart" in origin(project, "carbon").text
    assert number(project, "carbon")[1] > 0.23
    said = " ".join(next(entry for entry in project.steels.values() if entry.samples).said)
    assert "With these 6 samples the steel is taken to hold up to C 0.2" in said
    assert "Sample 5 stands apart with C 0.23 %: 2.00 standard deviations" in said


def test_a_rule_set_without_a_method_takes_the_envelope(tmp_path: Path, knowledge: Knowledge) -> None:
    plain = replace(knowledge, sampling=None)
    project = project_of(tmp_path, plain, with_steel(ERA + FOUR))
    assert number(project, "carbon") == (0.13, 0.15)
    assert plain.digest != knowledge.digest
