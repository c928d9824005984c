"""Mistakes planted one at a time into knowledge: each is caught, by loading or by a proof, at its file and line.

They go into a copy that holds the rules concerned and what these rest on, since the whole takes seconds each time.
"""

from __future__ import annotations

import re
import shutil
from functools import cache
from pathlib import Path

import pytest

from house_folder import change, make_house
from weldbasis.load import yaml_text
from weldbasis.load.knowledge import load_knowledge
from weldbasis.places import kb_folder
from weldbasis.problem import Refused
from weldbasis.proofs.finding import VetFinding
from weldbasis.vet import from_problem, vet

CET = "rules/preheat/preheat-cet-member.yaml"
CAPPED = "rules/preheat/preheat-cet-capped-member.yaml"
ITO = "rules/preheat/preheat-ito-bessyo-member.yaml"
SUZUKI = "rules/preheat/preheat-suzuki-member.yaml"
INDEX = "rules/preheat/cracking-index.yaml"
STRESS = "rules/preheat/mean-weld-stress.yaml"
MIN = "rules/preheat/min-preheat.yaml"
HARD = "rules/preheat/preheat-seferian-hard.yaml"
SEFERIAN = "rules/preheat/preheat-seferian-member.yaml"
FACTOR = "rules/restraint/restraint-factor.yaml"
SCALE = "rules/hydrogen/hydrogen-scale.yaml"
HYDROGEN = "rules/hydrogen/hydrogen.yaml"
COMBINED = "rules/thickness/combined-thickness.yaml"
WINDOW = "rules/interpass/interpass-below-preheat.yaml"
HEAT = "rules/interpass/heat-input-min-member.yaml"
HOURS = "rules/hydrogen-release/hydrogen-release-hours-mean.yaml"
HV = "rules/hardness/hv-max-member.yaml"
HOLD = "rules/post-weld/pwht-hold-viii.yaml"
PARAMETER = "rules/post-weld/pwht-parameter.yaml"
GROUP = "rules/steel-family/group-plain.yaml"
STRENGTH = "rules/steel-family/strength-class-yield.yaml"
EQUIVALENT = "rules/carbon-equivalents/cet.yaml"
THIN = "rules/cooling/t85-thin.yaml"
PEENING = "rules/peening/peening-case-known.yaml"
D11 = "rules/post-weld/pwht-range-d11.yaml"
WEAK = "rules/carbon-equivalents/ce-iiw.yaml"
JOINT = "quantities/joint.yaml"
# Files of a house layer.
YARD = "rules/preheat/min-preheat.yaml"
LAMPS = "rules/yard/yard-lamps.yaml"
AMENDED = "amendments.yaml"
RESTRAINT = "quantities/joint.yaml"
HEAD = "kb.yaml"
# What else the proofs about these rules rest on.
BESIDE = [
    "rules/cooling/shape-factor-thick.yaml",
    "rules/cooling/shape-factor-thin.yaml",
    "rules/hardness/t-martensite.yaml",
    "rules/hardness/t-no-martensite.yaml",
    "rules/hot-cracking/ucs.yaml",
    "rules/post-weld/pwht-hold-b313-2012.yaml",
    "rules/post-weld/pwht-hold-b313-2016.yaml",
    "rules/post-weld/pwht-hold-code.yaml",
    "rules/post-weld/pwht-hold-d11.yaml",
    "rules/post-weld/pwht-hold-en13445.yaml",
    "rules/post-weld/pwht-hold-member.yaml",
    "rules/post-weld/pwht-hold-practice.yaml",
    "rules/post-weld/pwht-hold.yaml",
    "rules/post-weld/reheat-dg1.yaml",
    "rules/post-weld/reheat-psr.yaml",
    "rules/preheat/preheat-weld-metal.yaml",
]
CASES_OF_A_RULE = 3

# file, text to replace, replacement, line of the finding (or file and line, where it is another), words of the finding
PLANTED: list[tuple[str, str, str, int | str, str]] = [
    # shape
    (CET, "kind: formula", "kind: formulae", 4, "'formulae' is no kind of rule"),
    (CET, "for_each: member", "for_every: member", 5, "'for_every' is not known here"),
    (CET, "checked: from-memory", "checked: believed", 17, "'believed' is not one of the words known here"),
    (CET, "title: Preheat from CET (EN 1011-2, C.3)\n", "", 1, "'title' is missing here"),
    (CET, "version: 1\n", "version: one\n", 2, "'one' stands where a whole number is wanted"),
    (CET, "version: 1\n", "version: 1\nversion: 1\n", 3, "'version' stands here twice"),
    (FACTOR, "read_as: the-one-row", "read_as: first-row", 8, "'first-row' is not one of the words known here"),
    (HYDROGEN, "take: first", "take: frist", 7, "'frist' is not one of the words known here"),
    (WINDOW, "level: stop", "level: halt", 8, "'halt' is not one of the words known here"),
    (JOINT, "worse: higher}\n    given: must", "worse: hihger}\n    given: must", 18,
     "'hihger' is not one of the words known here"),
    ("quantities/heat.yaml", "", "quantities: []\n", 1, "this is empty, or holds too little"),
    ("sources/iso-3690.yaml", "kind: standard", "kind: norm", 3, "'norm' is not one of the words known here"),
    ("kb.yaml", "custodian:", "keeper:", 2, "'custodian' is missing here"),
    (FACTOR, "  - {when: {restraint: low}, give: 20}", "  - {when: {restraint: low}, give: 20", 11, "this is no YAML"),
    # references
    (CET, "d: thickness", "d: thicknes", 7, "'thicknes' is no quantity of the vocabulary"),
    (CET, "source: en-1011-2", "source: en-1011-3", 17, "cites 'en-1011-3', which is no source"),
    (CET, "gives: preheat_cet_member", "gives: preheat_cet_membre", 6,
     "'preheat_cet_membre' is no quantity of the vocabulary"),
    (CET, 'thickness: "[10, 90]"', 'thicknes: "[10, 90]"', 8, "'thicknes' is no quantity of the vocabulary"),
    (CET, "{member_role: weld-metal}", "{member_role: weld-metall}", 11, "'weld-metall' is no level of member_role"),
    (CET, '"[10, 90]"', '"[90, 10]"', 8, "holds no number"),
    (CET, "id: preheat-cet-member", "id: preheat-cet-members", 1, "the file is called preheat-cet-member.yaml"),
    (CET, "version: 1\ntitle", "version: 2\ntitle", 2, "is version 2, its last changes entry is of 1"),
    (HV, "  - {version: 1, date", "  - {version: 3, date", 19, "stands after"),
    (FACTOR, "restraint: medium", "restraint: middling", 11, "'middling' is no level of restraint"),
    (HYDROGEN, "consumable_hydrogen_max,", "consumable_hydrogen,", 8,
     "'consumable_hydrogen' is no quantity of the vocabulary"),
    (COMBINED, "of: heat_path_thickness", "of: thickness", 7, "it must go from members to the joint"),
    (HARD, "rail]", "rails]", 9, "'rails' is no level of steel_family"),
    (STRENGTH, "give: high", "give: higher", 11, "'higher' is no level of strength_class_yield"),
    (MIN, "reads: {T: preheat_required", "reads: {T: cet", 7,
     "works for each joint and reads cet, which each member has"),
    (MIN, "T: preheat_required", "T: min_preheat", 1, "the rules close a circle"),
    (HOURS, "model: plate-diffusion-time", "model: plate-difusion-time", 7, "there is no model 'plate-difusion-time'"),
    (HOURS, "d0_low_cm2_s: 0.12, ", "", 9, "needs d0_low_cm2_s among its constants"),
    (JOINT, "id: restraint_length", "id: restraint_intensity", 79, "stands here a second time"),
    ("cases/restraint.yaml", "rule: restraint-factor", "rule: restraint-facto", 3, "which is no rule"),
    ("cases/restraint.yaml", '{restraint: "low"}', '{restrant: "low"}', 3,
     "'restrant' is no quantity of the vocabulary"),
    ("steels/en-10025-2.yaml", "family: carbon", "family: carbo", 5, "'carbo' is no level of steel_family"),
    ("consumables/iso-2560.yaml", "covering: rutile", "covering: rutil", 3, "'rutil' is no level of covering"),
    # words
    (CET, 'say: "CET {CET}', 'say: "CET {CEQ}', 15, "names {CEQ}, which the rule does not read"),
    (SCALE, 'say: "{hydrogen} mL/100 g', 'say: "{heat_input} mL/100 g', 15,
     "names {heat_input}, which the rule does not read"),
    # units
    (INDEX, 'unit: "kgf/mm**2"', 'unit: "kJ/mm"', 8, "s of rule cracking-index"),
    (STRESS, 'gives_unit: "kgf/mm**2"', "gives_unit: mm", 9, "gives_unit of rule mean-weld-stress"),
    (JOINT, 'number: {unit: mm, range: "[0.5, 400]"', 'number: {unit: mmm, range: "[0.5, 400]"', 14,
     "measured in 'mmm', which is no unit"),
    (FACTOR, "give: 40", "give: 40000", 11, "row 2 gives restraint_factor 40000, and the vocabulary allows"),
    (STRENGTH, 'yield_strength: "> 460"', 'yield_strength: "> 460000"', 11,
     "row 2 is for yield_strength > 460000, and the vocabulary allows"),
    (THIN, 'valid_within: {min_preheat: "[-20, 450]"}', 'valid_within: {min_preheat: "> 700"}', 9,
     "lies outside the vocabulary's [-20, 500] degC"),
    (THIN, "applies_when: {member_role: parent}", 'applies_when: {member_role: parent, min_preheat: "> 460"}', 9,
     "can hold nowhere"),
    (MIN, 'formula: "round_up(T, step)"', 'formula: "2000 + round_up(T, step)"', 8,
     "and the vocabulary allows min_preheat only"),
    # formulas
    (CET, "160*tanh(d/35)", "160*tahn(d/35)", 13, "there is no function 'tahn'"),
    (CET, "160*tanh(d/35)", "160*tanh(dd/35)", 13, "the formula names 'dd', which reads does not bind"),
    (CET, "160*tanh(d/35)", "160*tanh(35)", 7, "reads binds 'd', which the formula does not use"),
    (CET, "62*HD**0.35", "62*(HD - 2)**0.35", 13, "(HD − 2)^0.35 is a fractional power of less than zero"),
    (INDEX, ', mean_weld_stress: "> 0"', "", 10, "log10(0.017 × 4 × s) is a logarithm of zero or less"),
    (INDEX, 'hydrogen_jis: "> 0"', 'hydrogen_jis: ">= 0"', 10, "log10(H) is a logarithm of zero or less"),
    (HV, "max(tB/tM, 1.01)", "tB/tM", 10, "is a division by zero inside its validity"),
    (HV, 't85: "> 0"', 't85: ">= 0"', 10, "log10(t / tM) is a logarithm of zero or less"),
    (SEFERIAN, "Ct - 0.25", "Ct - 0.35", 9, "sqrt(Ct − 0.35) is a square root of less than zero"),
    (THIN, "1/(500 - T0)", "1/(400 - T0)", 10, "1 / (400 − T0) is a division by zero"),
    (MIN, "round_up(T, step)", "round_up(T, step - 20)", 8,
     "round_up(T, step − 20) is rounding to steps of zero or less"),
    (PARAMETER, "log10(n*t)", "log10(n*t - 1)", 8, "log10(n × t − 1) is a logarithm of zero or less"),
    (WINDOW, '"Tp <= Ti"', '"Tp <= sqrt(Ti - 200)"', 7, "sqrt(Ti − 200) is a square root of less than zero"),
    (WINDOW, '"Tp <= Ti"', '"Tp <= Tj"', 7, "must_hold names 'Tj', which reads does not bind"),
    # directions
    (CET, "hydrogen: up", "hydrogen: down", 14, "says that the result goes down with hydrogen"),
    (CET, "heat_input: down", "heat_input: up", 14, "says that the result goes up with heat_input"),
    (THIN, "member_thickness: down", "member_thickness: up", 11, "says that the result goes up with member_thickness"),
    (HEAT, "t85_shortest: up", "t85_shortest: down", 10, "says that the result goes down with t85_shortest"),
    # tables
    (FACTOR, "restraint: medium}", "restraint: low}", 11,
     "rows 1 and 2 both match where restraint is low, and give 20 and 40"),
    (SCALE, '"(5, 10]"', '"[5, 10]"', 13, "rows 3 and 4 both match where hydrogen is 5, and give C and D"),
    (SCALE, '"(10, 15]"', '"(11, 15]"', 9, "no row covers hydrogen is (10, 11]"),
    (SCALE, '"> 15"', '"> 15.5"', 9, "no row covers hydrogen is (15, 15.5]"),
    (FACTOR, "  - {when: {restraint: high}, give: 69}\n", "", 9, "no row covers restraint is high"),
    (GROUP, 'valid_within: {carbon: "<= 0.25"}', 'valid_within: {carbon: "<= 0.25", yield_strength: "<= 690"}', 19,
     "row 8 never decides anything"),
    (GROUP, "tmcp, quenched-tempered, weathering, cast", "tmcp, quenched-tempered, weathering, rail, cast", 11,
     "no row covers steel_family is rail"),
    (HOLD, '["9A", "9B", "10A"], member_thickness: 400', '["9A", "9B", "10A"], member_thickness: 40', 11,
     "the nodes reach over member_thickness [0.5, 40] only"),
    (HOLD, '"9B", "10A", "15E"]}', '"9B", "10A", "11B", "15E"]}', 11, "no curve holds where p_number is 11B"),
    (HOLD, '{p_number: "15E", member_thickness: 0.5}', '{p_number: ["15E", "1"], member_thickness: 0.5}', 11,
     "a curve needs two or more nodes"),
    (PEENING, "  - {give: not-needed}\n",
     "  - {give: not-needed}\n  - {when: {restraint: low, form: butt}, give: not-needed}\n", 11,
     "row 2 never decides anything: row 1 stands before it"),
    ("quantities/post-weld.yaml",
     "with heat treatment decided\n    of: joint\n    levels: {order: [not-needed, recommended, forbidden], "
     "worse: last}",
     "with heat treatment decided\n    of: joint\n    levels: {order: [not-needed, recommended, forbidden]}",
     "rules/peening/peening-case-known.yaml:11",
     "rows 1 and 2 both hold, row 2 is taken, and row 1 gives another peening_case_known"),
    (D11, "the-one-row\nrows:\n",
     "most-demanding-row\nrows:\n  - {when: {steel_family: carbon}, give: {pwht_d11_min: 590, pwht_d11_max: "
     "610}}\n", 12, "rows 1 and 2 both hold, row 2 is taken, and row 1 asks for more pwht_d11_max"),
    (WEAK, '{any_of: [{pcm_limit: absent}, {carbon: "> 0.12"}]}', '{carbon: "> 12"}', 10,
     "what candidates 1 when asks for can never be"),
    # limits of sources
    (CET, '"[10, 90]"', '"[10, 100]"', 8,
     "lets in thickness [10, 100], and en-1011-2 (Annex C, C.3) holds for [10, 90] only"),
    (CET, 'boron: "<= 0.005",\n', "\n", 8, "lets in boron [0, 0.01], and en-1011-2"),
    (ITO, 'hydrogen_jis: "[1.0, 5.0]"', 'hydrogen_jis: "[0.5, 5.0]"', 11,
     "lets in hydrogen_jis [0.5, 5], and ito-bessyo-1968"),
    (ITO, "holds_to: preheating-temperature", "holds_to: preheat-temperature", 16,
     "is held to 'preheat-temperature', and ito-bessyo-1968 states no such limits"),
    (SUZUKI, 'heat_input: "the', 'nitrogen: "the', 9, "lets in heat_input"),
    (CAPPED, 'carbon: "less', 'copper: "less', 19, "may go beyond its source in copper, which it holds to"),
    ("sources/ito-bessyo-1968.yaml", "copper:", "coper:", 10, "'coper' is no quantity of the vocabulary"),
    ("sources/jws-multirun.yaml", "id: multi-run-preheat", "id: multirun-preheat", 6,
     "no rule is held to the limits multirun-preheat"),
    # papers and cases
    ("sources/iso-9999.yaml", "", "id: iso-9999\ntitle: A norm\nkind: standard\nhow_checked: Not read.\n", 1,
     "nothing cites iso-9999"),
    (CET, "697*CET", "700*CET", "cases/preheat-cet-edges.yaml:4", "expected 232.316 ± 0.01, got 233.816"),
    ("cases/restraint.yaml", "expect: {restraint_factor: 20}", "expect: {restraint_factor: 21}", 3, "expected 21"),
    (COMBINED, "take: sum", "take: highest", "cases/thickness.yaml:74", "expected 52 ± 0, got 40"),
    # unused
    (EQUIVALENT, "gives: cet\n", "gives: cet_bound\n", 1, "the rules close a circle"),
    (JOINT, "  - id: form\n",
     "  - id: colour\n    title: Colour\n    of: joint\n    levels: {order: [red, blue]}\n    given: may\n    "
     "says: Paint.\n  - id: form\n", 2, "nothing reads colour"),
    (JOINT, "  - id: form\n",
     "  - id: colour\n    title: Colour\n    of: joint\n    levels: {order: [red, blue]}\n    says: Paint.\n  - "
     "id: form\n", 2, "no rule gives colour and no project may"),
]  # fmt: skip


# The same for a house layer on the small set of the fixtures.
PLANTED_IN_A_HOUSE = [
    (YARD, '{d: "(30, 100]", restraint: [low, medium]}', '{d: "(40, 100]", restraint: [low, medium]}', 10,
     "no row covers d is (30, 40]"),
    (YARD, '{d: "(30, 100]", restraint: [low, medium]}', '{d: "[30, 100]", restraint: [low, medium]}', 12,
     "rows 1 and 2 both match where d is 30"),
    (YARD, 'valid_within: {thickness: "[1, 100]"}', 'valid_within: {thickness: "[1, 120]"}', 10,
     "no row covers d is (100, 120]"),
    (YARD, 'valid_within: {thickness: "[1, 100]"}', 'valid_within: {thickness: "[1, 20]"}', 12,
     "row 2 never decides anything"),
    (YARD, "give: 120", "give: 1200", 13, "row 3 gives min_preheat 1200, and the vocabulary allows"),
    (YARD, "give: 120", "give: 90.5x", 13, "is no range"),
    (YARD, "restraint: high}, give", "restraint: higher}, give", 13, "'higher' is no level of restraint"),
    (YARD, "{result} °C here", "{heat_input} °C here", 14, "names {heat_input}, which the rule does not read"),
    (YARD, "version: 3\n", "version: 4\n", 2, "is version 4, its last changes entry is of 3"),
    (YARD, "source: small-handbook", "source: yard-handbook", 16, "cites 'yard-handbook', which is no source"),
    (YARD, "{d: thickness,", "{d: {quantity: thickness, unit: kJ},", 7, "d of rule min-preheat"),
    (LAMPS, 'thickness: "> 80"', 'thickness: "> 800"', 7, "lies outside the vocabulary's"),
    (LAMPS, "level: note", "level: nota", 8, "'nota' is not one of the words known here"),
    (LAMPS, "level: note\n", 'level: note\nmust_hold: "log10(thickness - 90) <= 1"\n', 9,
     "log10(thickness − 90) is a logarithm of zero or less"),
    (LAMPS, "level: note\n", 'level: note\nmust_hold: "thick <= 1"\n', 9, "must_hold names 'thick'"),
    (AMENDED, "how: tighten, why: Two", "how: relax, why: Two", 2, "is relaxed without one"),
    (AMENDED, "{rule: yard-lamps, how: add", "{rule: yard-lamp, how: add", 3,
     "this layer holds no rule 'yard-lamp'"),
    (AMENDED, "rule: outdoors-cold", "rule: outdoor-cold", 4, "there is no rule 'outdoor-cold' beneath to withdraw"),
    (AMENDED, "rule: outdoors-cold, how: withdraw", "rule: thickness, how: withdraw", 4,
     "without the rule thickness of the layer beneath nothing gives thickness, which min-preheat and 2 more read"),
    (AMENDED, "how: tighten, why: Two", "how: harden, why: Two", 2, "'harden' is not one of the words known here"),
    (RESTRAINT, "if_not_given: low", "if_not_given: lowest", 2, "'lowest' is no level of restraint"),
    (RESTRAINT, "order: [low, medium, high]", "order: [low, medium]", 5, "'high' is no level of restraint"),
    (HEAD, "stands_on: ../kb", "stands_on: ../nowhere", 5, "'../nowhere' is no set of rules"),
]  # fmt: skip

# file, text to replace, replacement, and the whole text of the finding
TOLD = [
    (CET, "62*HD**0.35", "62*(HD - 2)**0.35",
     "rules/preheat/preheat-cet-member.yaml:13:1: stop: rule preheat-cet-member: (HD − 2)^0.35 is a "
     "fractional power of less than zero inside its validity, and has no value there\n"
     "    for example CET = 0.35, d = 50, HD = 1, Q = 2.25\n"
     "    narrow valid_within so that it cannot be, or bound the part with max or min"),
    (HV, "max(tB/tM, 1.01)", "tB/tM",
     "rules/hardness/hv-max-member.yaml:10:1: stop: rule hv-max-member: 4 × log10(t / tM) / log10(tB / tM) is "
     "a division by zero inside its validity, and has no value there\n"
     "    for example HM = 700, HB = 200, t = 2500, tM = 909091, tB = 909091\n"
     "    narrow valid_within so that it cannot be, or bound the part with max or min"),
    (SCALE, '"(10, 15]"', '"(11, 15]"',
     "rules/hydrogen/hydrogen-scale.yaml:9:1: caution: rule hydrogen-scale: no row covers hydrogen is (10, "
     "11]\n"
     "    for example hydrogen = 10.5\n"
     "    add a row (give: absent where the table is silent on purpose), or narrow valid_within"),
    (SCALE, '"(5, 10]"', '"[5, 10]"',
     "rules/hydrogen/hydrogen-scale.yaml:13:5: stop: rule hydrogen-scale: rows 3 and 4 both match where "
     "hydrogen is 5, and give C and D\n"
     "    part them, or read the table as most-demanding-row"),
    (CET, '"[10, 90]"', '"[10, 100]"',
     "rules/preheat/preheat-cet-member.yaml:8:47: stop: rule preheat-cet-member lets in thickness [10, 100], "
     "and en-1011-2 (Annex C, C.3) holds for [10, 90] only\n"
     "    for example thickness = 100\n"
     "    narrow valid_within, or say in the cite why: beyond: {thickness: …}"),
    (CET, "hydrogen: up", "hydrogen: down",
     "rules/preheat/preheat-cet-member.yaml:14:49: stop: rule preheat-cet-member says that the result goes "
     "down with hydrogen, and the formula does not\n"
     "    for example CET = 0.5, HD = 1, Q = 0.5, d = 10 gives 124.26; HD = 1.95 gives 140.585\n"
     "    turn the direction round, narrow valid_within, or write either"),
    (FACTOR, "give: 40", "give: 40000",
     "rules/restraint/restraint-factor.yaml:11:33: stop: rule restraint-factor: row 2 gives restraint_factor "
     "40000, and the vocabulary allows [0, 100]\n"
     "    look at the unit and the decimal point, or widen the vocabulary"),
    (D11, "the-one-row\nrows:\n",
     "most-demanding-row\nrows:\n  - {when: {steel_family: carbon}, give: {pwht_d11_min: 590, pwht_d11_max: 610}}\n",
     "rules/post-weld/pwht-range-d11.yaml:12:5: stop: rule pwht-range-d11: rows 1 and 2 both hold, row 2 is "
     "taken, and row 1 asks for more pwht_d11_max\n"
     "    for example steel_family = carbon\n"
     "    part the rows, or give each quantity by a rule of its own"),
    (PEENING, "  - {give: not-needed}\n",
     "  - {give: not-needed}\n  - {when: {restraint: low, form: butt}, give: not-needed}\n",
     "rules/peening/peening-case-known.yaml:11:5: caution: rule peening-case-known: row 2 never decides "
     "anything: row 1 stands before it\n"
     "    take the row out, or widen what it is for"),
    (CAPPED, 'carbon: "less', 'copper: "less',
     "rules/preheat/preheat-cet-capped-member.yaml:19:15: caution: rule preheat-cet-capped-member may go "
     "beyond its source in copper, which it holds to <= 0.7 anyway\n"
     "    take copper out of beyond"),
    (SCALE, 'say: "{hydrogen} mL/100 g', 'say: "{heat_input} mL/100 g',
     "rules/hydrogen/hydrogen-scale.yaml:15:1: stop: say of rule hydrogen-scale names {heat_input}, which the "
     "rule does not read\n"
     "    Known: hydrogen, hydrogen_scale, result."),
    (HOLD, '"9B", "10A", "15E"]}', '"9B", "10A", "11B", "15E"]}',
     "rules/post-weld/pwht-hold-viii.yaml:11:1: caution: rule pwht-hold-viii: no curve holds where p_number "
     "is 11B\n"
     "    for example member_thickness = 200, p_number = 11B\n"
     "    add its nodes, or narrow valid_within"),
    (YARD, 'formula: "round_up(T, step)"', 'formula: "2000 + round_up(T, step)"',
     "rules/preheat/min-preheat.yaml:8:1: stop: rule min-preheat: the formula gives 1600 to 2825, and the "
     "vocabulary allows min_preheat only [-20, 500] degC\n"
     "    look at the units of reads and gives_unit, or at the vocabulary"),
    (WINDOW, '"Tp <= Ti"', '"Tp <= Tj"',
     "rules/interpass/interpass-below-preheat.yaml:7:1: stop: rule interpass-below-preheat: must_hold names "
     "'Tj', which reads does not bind"),
    (THIN, "applies_when: {member_role: parent}", 'applies_when: {member_role: parent, min_preheat: "> 460"}',
     "rules/cooling/t85-thin.yaml:9:1: stop: rule t85-thin can hold nowhere: no values meet "
     "applies_when and valid_within together\n"
     "    widen one of them, or take the rule out"),
]  # fmt: skip


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A small copy of the knowledge base, in which the planted files stand at their places and lines."""
    target = tmp_path_factory.mktemp("planted") / "kb"
    parts = sorted({fault[0] for fault in PLANTED} | {*BESIDE, "kb.yaml"})
    parts += [f"quantities/{path.name}" for path in (kb_folder() / "quantities").glob("*.yaml")]
    for name in parts:
        if (kb_folder() / name).exists() and not name.startswith("cases/"):
            (target / name).parent.mkdir(parents=True, exist_ok=True)
            shutil.copyfile(kb_folder() / name, target / name)
    rules = {path.stem for path in (target / "rules").rglob("*.yaml")}
    (target / "cases").mkdir()
    for path in sorted((kb_folder() / "cases").glob("*.yaml")):
        kept = few_cases(path.read_text(encoding="utf-8"), rules)
        if "- id:" in kept:
            (target / "cases" / path.name).write_text(kept, encoding="utf-8")
    said = "\n".join(path.read_text(encoding="utf-8") for path in target.rglob("*.yaml"))
    for source in set(re.findall(r"source: ([\w.-]+)", said)):
        shutil.copyfile(kb_folder() / "sources" / f"{source}.yaml", target / "sources" / f"{source}.yaml")
    return target


def few_cases(text: str, rules: set[str]) -> str:
    """The first cases of each rule; lines of the others are left empty, so that all keep their numbers."""
    head, *cases = re.split(r"(?m)^(?=  - id: )", text)
    left = dict.fromkeys(rules, CASES_OF_A_RULE)
    kept = [head]
    for case in cases:
        named = re.search(r"rule: (\S+)", case)
        assert named
        left[named[1]] = left.get(named[1], 0) - 1
        kept.append(case if left[named[1]] >= 0 else "\n" * case.count("\n"))
    return "".join(kept)


@pytest.fixture(autouse=True)
def read_once(folder: Path, monkeypatch: pytest.MonkeyPatch, parsed: object) -> None:
    """Files that stay as they are are parsed once; names in messages start at the folder."""
    monkeypatch.setattr(yaml_text, "parse_yaml", parsed)
    monkeypatch.chdir(folder)


@pytest.fixture(scope="module")
def parsed() -> object:
    return cache(yaml_text.parse_yaml)


def findings(folder: Path) -> list[VetFinding]:
    """All that loading and vetting say of a folder."""
    try:
        return list(vet(load_knowledge(folder)).findings)
    except Refused as refused:
        return [from_problem(problem) for problem in refused.problems]


def test_the_copy_itself_is_sound(folder: Path) -> None:
    left = [str(f) for f in findings(folder) if f.level == "stop" or f.check in ("gaps", "formulas", "limits")]
    assert left == []


@pytest.mark.parametrize(("file", "old", "new", "line", "words"), PLANTED, ids=[f"{p[0]}:{p[4][:40]}" for p in PLANTED])
def test_planted_fault_is_caught_at_its_place(
    folder: Path, file: str, old: str, new: str, line: int | str, words: str
) -> None:
    path = folder / file
    before = path.read_text(encoding="utf-8") if path.exists() else None
    assert before is None or old in before, f"{file} no longer holds {old!r}"
    path.write_text(new if before is None else before.replace(old, new, 1), encoding="utf-8")
    try:
        found = findings(folder)
    finally:
        if before is None:
            path.unlink()
        else:
            path.write_text(before, encoding="utf-8")
    hits = [finding for finding in found if words in finding.what]
    assert hits, "\n".join(str(finding) for finding in found[:10])
    expected = f"{file}:{line}" if isinstance(line, int) else line
    assert expected in {f"{hit.place.file}:{hit.place.line}" for hit in hits}


@pytest.mark.parametrize(
    ("file", "old", "new", "line", "words"), PLANTED_IN_A_HOUSE, ids=[f"{p[0]}:{p[4][:40]}" for p in PLANTED_IN_A_HOUSE]
)
def test_fault_planted_in_a_house_layer_is_caught_at_its_place(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, file: str, old: str, new: str, line: int, words: str
) -> None:
    house = make_house(tmp_path)
    monkeypatch.chdir(tmp_path)
    assert not any(words in finding.what for finding in findings(house))
    change(house / file, old, new)
    found = findings(house)
    hits = {f"{hit.place.file}:{hit.place.line}" for hit in found if words in hit.what}
    assert f"house/{file}:{line}" in hits, "\n".join(str(finding) for finding in found[:10])


@pytest.mark.parametrize(("file", "old", "new", "text"), TOLD, ids=[told[3].split(": ")[2][:50] for told in TOLD])
def test_a_finding_is_told_with_place_example_and_remedy(
    folder: Path, file: str, old: str, new: str, text: str
) -> None:
    path = folder / file
    before = path.read_text(encoding="utf-8")
    change(path, old, new)
    try:
        assert text in {str(finding) for finding in findings(folder)}
    finally:
        path.write_text(before, encoding="utf-8")
