"""CSV beside a project: any usual dialect reads the same, and every fault names its cell."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from weldbasis.knowledge import Knowledge
from weldbasis.problem import Problem, Refused
from weldbasis.project import Project, read_project
from weldbasis.project.csv_tables import read_table
from weldbasis.record import canonical_bytes
from weldbasis.values import Numbers

PROJECT = (
    "project: t\ntitle: t\nrules: working\ncertificates: {csv: c.csv}\n"
    'steels: {p: {grade: S355N, certificate: "C1"}}\njoints: {csv: w.csv}\n'
)
WELDS = (
    "joint,form,process,hydrogen [mL/100g],heat_input [kJ/mm],steel 1,thickness 1 [mm],steel 2,thickness 2 [in]\n"
    "J1,butt,135,3,1.2,p,20,p,1\n"
    'J2,tee,135,<= 4,0.9 to 1.4,p,"20 to 30",p,25 mm\n'
)
CERTIFICATES = "certificate,heat,C,Si,Mn,B [ppm]\nC1,H1,0.16,0.3,1.4,2\n"


def project_of(
    folder: Path, knowledge: Knowledge, welds: str | bytes = WELDS, certificates: str = CERTIFICATES
) -> Project:
    (folder / "project.yaml").write_text(PROJECT, encoding="utf-8")
    (folder / "c.csv").write_text(certificates, encoding="utf-8")
    (folder / "w.csv").write_bytes(welds if isinstance(welds, bytes) else welds.encode())
    return read_project(folder, knowledge)


def refused(folder: Path, knowledge: Knowledge, welds: str | bytes, certificates: str = CERTIFICATES) -> list[Problem]:
    with pytest.raises(Refused) as caught:
        project_of(folder, knowledge, welds, certificates)
    return list(caught.value.problems)


def numbers(project: Project, name: str) -> Numbers:
    column = project.facts.given[name]
    assert isinstance(column, Numbers)
    return column


def test_cells_come_in_vocabulary_units(tmp_path: Path, knowledge: Knowledge) -> None:
    project = project_of(tmp_path, knowledge)
    thickness, heat, hydrogen = (numbers(project, name) for name in ("member_thickness", "heat_input", "hydrogen"))
    np.testing.assert_allclose(thickness.low, [20, 25.4, np.nan, 20, 25, np.nan])
    np.testing.assert_allclose(thickness.high, [20, 25.4, np.nan, 30, 25, np.nan])
    np.testing.assert_allclose((heat.low, heat.high), [[1.2, 0.9], [1.2, 1.4]])
    least = knowledge.quantities["hydrogen"].range.low
    np.testing.assert_allclose(hydrogen.low, [3.0, least])
    np.testing.assert_allclose(hydrogen.high, [3.0, 4.0])


def test_certificate_units_are_those_of_the_headers(tmp_path: Path, knowledge: Knowledge) -> None:
    project = project_of(tmp_path, knowledge)
    assert project.steels["p"].composition["B"] == (0.0002, 0.0002)
    assert project.steels["p"].composition["C"] == (0.16, 0.16)
    assert (project.steels["p"].certificate, project.steels["p"].heat) == ("C1", "H1")


DIALECTS = {
    "byte order mark": ("\ufeff" + WELDS).encode(),
    "semicolons": WELDS.replace(",", ";").encode(),
    "tabs": WELDS.replace(",", "\t").encode(),
    "Windows line ends": WELDS.replace("\n", "\r\n").encode(),
    "old Macintosh line ends": WELDS.replace("\n", "\r").encode(),
    "no last line end": WELDS.rstrip("\n").encode(),
    "empty rows": WELDS.replace("\nJ2", "\n\n,,,,,,,,\nJ2").encode(),
    "empty columns behind": WELDS.replace("\n", ",,\n").encode(),
    "blanks around": WELDS.replace(",", " , ").replace('"', "").encode(),
    "units closer to headers": WELDS.replace(" [mm]", "[mm]").encode(),
    "parts joined by underscores": WELDS.replace("steel 1", "steel_1").replace("thickness 2", "thickness_2").encode(),
}


@pytest.mark.parametrize("name", DIALECTS)
def test_every_dialect_means_the_same(name: str, tmp_path: Path, knowledge: Knowledge) -> None:
    plain = project_of(tmp_path, knowledge)
    other = project_of(tmp_path, knowledge, DIALECTS[name])
    assert canonical_bytes(dict(other.meaning)) == canonical_bytes(dict(plain.meaning))


FAULTS = [
    (("135,3,1.2", '135,3,"1,2"'), (2, 5), "'1,2' has a decimal comma"),
    (("135,3,1.2", "135,3,1,2"), (2, 1), "10 cells stand under 9 headers"),
    (("J1,butt", "butt"), (2, 1), "8 cells stand under 9 headers"),
    (("135,3,1.2", "135,3,12 kg"), (2, 5), "joint J1, heat_input: 'kg' is a mass"),
    (("135,3,1.2", "135,3,99"), (2, 5), "lies outside what heat_input can be"),
    (("135,3,1.2", "137,3,1.2"), (2, 3), "'137' is no level of process"),
    (("p,20,p,1\n", "q,20,p,1\n"), (2, 6), "joint J1, member 1: 'q' is no steel of this project"),
    (("p,20,p,1\n", "p,,p,1\n"), (2, 6), "joint J1, member 1 needs a steel and a thickness"),
    (("p,20,p,1\n", "p,20,p,99\n"), (2, 9), "lies outside what member_thickness can be"),
    (("J1,", ","), (2, 1), "a joint has no name"),
    (("J2,", "J1,"), (3, 1), "joint 'J1' stands here twice"),
    (("heat_input [", "heat_imput ["), (1, 5), "'heat_imput' is no column of a weld list"),
    (("thickness 2", "thicknes 2"), (1, 9), "'thicknes 2' is no column of a weld list"),
    (("steel 1", "steel"), (1, 6), "each part has its own: steel 1, steel 2"),
    (("form,", "joint,"), (1, 2), "the header 'joint' stands here twice"),
    (("form,", ","), (1, 2), "a header is empty"),
    (('"20 to 30"', '"20 to 30" x'), (3, 1), "this is no CSV"),
]


@pytest.mark.parametrize(("change", "place", "words"), FAULTS, ids=[fault[2][:40] for fault in FAULTS])
def test_faults_of_a_weld_list_name_their_cell(
    change: tuple[str, str], place: tuple[int, int], words: str, tmp_path: Path, knowledge: Knowledge
) -> None:
    assert change[0] in WELDS
    problems = refused(tmp_path, knowledge, WELDS.replace(*change, 1))
    hits = [problem for problem in problems if words in str(problem)]
    assert hits, [str(problem) for problem in problems]
    assert Path(hits[0].place.file).name == "w.csv"
    assert (hits[0].place.line, hits[0].place.column) == place


def test_a_wrong_header_is_said_once_not_in_every_row(tmp_path: Path, knowledge: Knowledge) -> None:
    problems = refused(tmp_path, knowledge, WELDS.replace("heat_input [", "heat_imput ["))
    assert [problem.what for problem in problems] == ["'heat_imput' is no column of a weld list"]
    assert problems[0].do == "Did you mean 'heat_input'?"


def test_all_faults_of_all_files_come_at_once(tmp_path: Path, knowledge: Knowledge) -> None:
    problems = refused(tmp_path, knowledge, WELDS.replace("1.2", "12 kg"), CERTIFICATES.replace("0.16", "16"))
    assert [Path(problem.place.file).name for problem in problems] == ["c.csv", "w.csv"]


CERTIFICATE_FAULTS = [
    (("0.16", "16"), (2, 3), "steel 'p', C: '16' lies outside what carbon can be"),
    (("0.16", "o.16"), (2, 3), "steel 'p', C: 'o.16' is no number"),
    (("1.4,2", "1.4,2000"), (2, 6), "'2000 ppm' lies outside what boron can be"),
    (("heat,", "heat,Cc,"), (1, 3), "'Cc' is no column of a list of certificates"),
    (("heat,C,", "heat,carbon,"), (1, 3), "'carbon' is no column of a list of certificates"),
    (("C1,H1,0.16,0.3,1.4,2\n", "C1,H1,,,,\nC1,H2,,,,\n"), (3, 1), "certificate 'C1' stands here twice"),
    (("C1,H1", ",H1"), (2, 1), "a certificate has no number"),
    (("certificate,", "number,"), (1, 1), "no column is headed 'certificate'"),
]


@pytest.mark.parametrize(("change", "place", "words"), CERTIFICATE_FAULTS, ids=[f[2][:40] for f in CERTIFICATE_FAULTS])
def test_faults_of_a_list_of_certificates_name_their_cell(
    change: tuple[str, str], place: tuple[int, int], words: str, tmp_path: Path, knowledge: Knowledge
) -> None:
    text = CERTIFICATES.replace(*change, 1)
    if "Cc," in text:
        text = text.replace("H1,", "H1,1,")
    problems = refused(tmp_path, knowledge, WELDS, text)
    hits = [problem for problem in problems if words in str(problem)]
    assert hits, [str(problem) for problem in problems]
    assert Path(hits[0].place.file).name == "c.csv"
    assert (hits[0].place.line, hits[0].place.column) == place


def test_below_the_limit_of_detection(tmp_path: Path, knowledge: Knowledge) -> None:
    project = project_of(tmp_path, knowledge, WELDS, CERTIFICATES.replace("1.4,2", "1.4,<5"))
    assert project.steels["p"].composition["B"] == (0.0, 0.0005)


def test_a_number_sign_does_not_hide_a_joint(tmp_path: Path, knowledge: Knowledge) -> None:
    project = project_of(tmp_path, knowledge, WELDS.replace("J1", "#1"))
    assert [joint.id for joint in project.joints] == ["#1", "J2"]


def test_lines_count_past_quoted_line_breaks(tmp_path: Path) -> None:
    (tmp_path / "t.csv").write_text('a,b\n"one\ntwo",1\n\nx,2\n', encoding="utf-8")
    table = read_table(tmp_path / "t.csv", "t.csv")
    assert [(row.cells["a"], row.line) for row in table.rows] == [("one\ntwo", 2), ("x", 5)]


UNREADABLE = [
    (b"", "the file is empty"),
    (b"\n\n", "the first line is empty"),
    ("joint,form\nJ1,Stumpfnaht über Kopf\n".encode("latin-1"), "this is not UTF-8 text"),
    (WELDS.encode("utf-16"), "this is not UTF-8 text"),
    (b"PK\x03\x04\xff\xfe spreadsheet", "this is not UTF-8 text"),
    (b'a,b\n"open,1\n', "this is no CSV"),
    (b"a,b\n" + b"x" * 200_000 + b",1\n", "this is no CSV"),
]


@pytest.mark.parametrize(("data", "words"), UNREADABLE, ids=[words for _, words in UNREADABLE])
def test_what_is_no_table_is_said(data: bytes, words: str, tmp_path: Path) -> None:
    (tmp_path / "t.csv").write_bytes(data)
    with pytest.raises(Refused) as caught:
        read_table(tmp_path / "t.csv", "t.csv")
    assert words in str(caught.value)
    assert caught.value.problems[0].do


def test_a_missing_table_is_said_with_its_name(tmp_path: Path, knowledge: Knowledge) -> None:
    project_of(tmp_path, knowledge)
    (tmp_path / "w.csv").unlink()
    with pytest.raises(Refused, match=r"w\.csv:1:1: cannot be read: No such file or directory"):
        read_project(tmp_path, knowledge)
