"""The commands as a person runs them: what they print, where they write, how they end."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

from weldbasis.cli.main import COMMANDS
from weldbasis.places import site_folder


def run(*words: str, cwd: Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "weldbasis.cli.main", *words],
        cwd=cwd,
        capture_output=True,
        text=True,
        check=False,
        timeout=240,
        encoding="utf-8",
    )


@pytest.fixture(scope="module")
def started(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("work")
    done = run("start", "quay-crane", "--title", "Quay crane", cwd=folder)
    assert done.returncode == 0, done.stderr
    return folder


def test_start_makes_a_project_that_decides_at_once(started: Path) -> None:
    done = run("decide", "quay-crane", cwd=started)
    assert done.returncode == 0, done.stderr
    assert "Quay crane" in done.stdout
    assert "100 °C" in done.stdout
    assert "Decisions support qualified judgement" in done.stdout
    assert max(len(line) for line in done.stdout.splitlines() if not line.startswith("Decisions")) <= 80
    assert "\x1b" not in done.stdout
    assert (started / "quay-crane" / "record.json").exists()


def test_start_never_overwrites(started: Path) -> None:
    done = run("start", "quay-crane", cwd=started)
    assert done.returncode == 2
    assert "this file exists already" in done.stderr


def test_a_house_starts_sound_and_is_released_and_pinned(tmp_path: Path) -> None:
    """The house of the README: started, vetted, frozen, pinned by a project; then a release that is missing."""
    assert run("start", "--house", "yard", cwd=tmp_path).returncode == 0
    done = run("vet", "yard", "--quiet", cwd=tmp_path)
    assert done.returncode == 0, done.stdout
    assert "0 findings that stop work" in done.stdout
    done = run("freeze", "2027.1", "--kb", "yard", "--on", "2027-01-15", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    assert "not signed" in done.stdout
    assert "## 2027.1 (2027-01-15)" in (tmp_path / "yard/NEWS.md").read_text(encoding="utf-8")
    done = run("freeze", "2027.1", "--kb", "yard", cwd=tmp_path)
    assert (done.returncode, "release '2027.1' exists already" in done.stderr) == (2, True)
    run("start", "bridge", cwd=tmp_path)
    project = tmp_path / "bridge/project.yaml"
    text = project.read_text(encoding="utf-8")
    project.write_text(text.replace("rules: working", 'rules: "2027.1"\nhouse: ../yard'), encoding="utf-8")
    done = run("decide", "bridge", cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    assert "not released" not in done.stdout
    record = json.loads((tmp_path / "bridge/record.json").read_text(encoding="utf-8"))
    release = json.loads((tmp_path / "yard/releases/2027.1.json").read_text(encoding="utf-8"))
    assert record["rules"] == {"release": "2027.1", "digest": release["digest"]}
    assert run("replay", "bridge/record.json", cwd=tmp_path).returncode == 0
    (tmp_path / "yard/releases/2027.1.json").unlink()
    done = run("decide", "bridge", cwd=tmp_path)
    assert done.returncode == 2
    assert "the project is pinned to release '2027.1', which is missing" in done.stderr
    assert "there are: none" in done.stderr


def test_freeze_refuses_a_meaning_that_moved_under_its_version(tmp_path: Path) -> None:
    run("start", "--house", "yard", cwd=tmp_path)
    run("freeze", "2027.1", "--kb", "yard", cwd=tmp_path)
    rule = tmp_path / "yard/rules/house/house-thick-plate-preheat.yaml"
    rule.write_text(rule.read_text(encoding="utf-8").replace("> 60", "> 50"), encoding="utf-8")
    for words in (("freeze", "2027.2", "--kb", "yard"), ("vet", "yard", "--quiet")):
        done = run(*words, cwd=tmp_path)
        assert done.returncode == 1
        assert "asks for something else than in release 2027.1, and is still version 1" in done.stdout + done.stderr
    assert not (tmp_path / "yard/releases/2027.2.json").exists()


def test_replay_agrees_then_names_the_joint_that_was_changed(started: Path) -> None:
    run("decide", "quay-crane", cwd=started)
    record = started / "quay-crane" / "record.json"
    done = run("replay", str(record), cwd=started)
    assert (done.returncode, "same bytes" in done.stdout) == (0, True)
    kept = record.read_bytes()
    data = json.loads(kept)
    data["joints"][0]["quantities"]["thickness"]["high"] = 31
    record.write_text(json.dumps(data), encoding="utf-8")
    done = run("replay", str(record), cwd=started)
    assert done.returncode == 1
    assert "joint J1: quantities.thickness.high: the record says 31, now 30.0" in done.stdout
    record.write_text("{", encoding="utf-8")
    done = run("replay", str(record), cwd=started)
    assert done.returncode == 2
    assert "this is no JSON" in done.stderr
    record.write_bytes(kept)


def test_why_tells_the_chain_and_offers_the_nearest_joint(started: Path) -> None:
    done = run("why", "quay-crane", "J1", "--decision", "min_preheat", cwd=started)
    assert done.returncode == 0, done.stderr
    assert "697 × 0.32 + 160 × tanh(30 / 35)" in done.stdout.replace("\n", " ").replace("  ", " ")
    assert "[preheat-cet-member]" in done.stdout
    done = run("why", "quay-crane", "J11", cwd=started)
    assert done.returncode == 2
    assert "Did you mean 'J1'?" in done.stderr
    data = json.loads(run("why", "quay-crane", "J1", "--json", cwd=started).stdout)
    assert data["format"] == "weldbasis-trace/1"


def test_why_not_names_what_stands_against_and_levers_what_would_help(started: Path) -> None:
    done = run("why", "quay-crane", "J1", "--not", "preheat 50 °C", cwd=started)
    assert done.returncode == 0, done.stderr
    words = " ".join(done.stdout.split())
    assert "governs: " in words
    assert words.index("for more than 50 °C:") < words.index("[preheat-cet-member]")
    assert "en-1011-2, Annex C, C.3" in words
    done = run("why", "quay-crane", "J1", "--not", "preheat 400", cwd=started)
    assert "more than the rules ask for" in done.stdout
    assert "interpass-below-preheat" in done.stdout
    done = run("levers", "quay-crane", "J1", "--wish", "preheat <= 50", cwd=started)
    assert done.returncode == 0, done.stderr
    assert "H5 (now)" in done.stdout
    assert "●" in done.stdout
    assert "To reach minimum preheat and interpass temperature <= 50 °C" in done.stdout
    assert max(len(line) for line in done.stdout.splitlines() if not line.startswith("Decisions")) <= 80
    data = json.loads(run("levers", "quay-crane", "J1", "--wish", "preheat <= 50", "--json", cwd=started).stdout)
    assert data["format"] == "weldbasis-levers/1"
    assert data["ways"]
    for line in (("why", "quay-crane", "J1", "--not", "warmth 5"), ("levers", "quay-crane", "J1", "--wish", "soon")):
        done = run(*line, cwd=started)
        assert done.returncode == 2
        assert "Traceback" not in done.stderr


def test_decide_ends_with_1_when_a_finding_stops_work(started: Path) -> None:
    done = run("decide", str(site_folder() / "projects" / "tideway-gates"), "--no-record", cwd=started)
    assert done.returncode == 1
    assert "STOP G21" in done.stdout


def test_bad_input_ends_with_2_and_no_traceback(started: Path) -> None:
    broken = started / "broken"
    broken.mkdir(exist_ok=True)
    (broken / "project.yaml").write_text("project: b\ntitle: no\n", encoding="utf-8")
    for words in (
        ("decide", "broken"),
        ("why", "broken", "J1"),
        ("publish", "broken", "--to", "out"),
        ("decide", "nowhere"),
        ("vet", "broken"),
        ("replay", "broken/project.yaml"),
        ("deside", "x"),
    ):
        done = run(*words, cwd=started)
        assert done.returncode in (1, 2), words
        assert done.returncode == (1 if words[0] == "vet" else 2), done.stdout + done.stderr
        assert "Traceback" not in done.stderr


def test_publish_writes_where_it_says_and_nowhere_else(started: Path) -> None:
    def source() -> set[Path]:
        return {path for path in site_folder().rglob("*") if "__pycache__" not in path.parts}

    before = source()
    for _ in range(2):  # the second time over a site of its own
        done = run("publish", "quay-crane", "--to", "sites/crane", cwd=started)
        assert done.returncode == 0, done.stderr
        site = started / "sites" / "crane"
        assert (site / "index.html").resolve().as_uri() in done.stdout
        assert "Quay crane" in (site / "index.html").read_text(encoding="utf-8")
        assert (site / "projects" / "quay-crane" / "joints" / "J1.html").is_file()
        assert [path.name for path in site.parent.iterdir()] == ["crane"]
    assert source() == before


def test_publish_never_takes_a_foreign_folder(started: Path) -> None:
    foreign = started / "photos"
    foreign.mkdir(exist_ok=True)
    (foreign / "bridge.jpg").write_text("x", encoding="utf-8")
    done = run("publish", "quay-crane", "--to", "photos", cwd=started)
    assert done.returncode == 2
    assert "weldbasis did not make" in done.stderr
    assert (foreign / "bridge.jpg").exists()


def test_vet_of_the_published_practice_is_clean(started: Path) -> None:
    done = run("vet", "--quiet", cwd=started)
    assert done.returncode == 0, done.stdout
    assert "0 findings that stop work" in done.stdout
    data = json.loads(run("vet", "--json", cwd=started).stdout)
    assert data["counts"]["cases"] == data["counts"]["cases passed"]


def test_show_prints_a_rule_with_its_table_and_history(started: Path) -> None:
    done = run("show", "process-efficiency", cwd=started)
    assert done.returncode == 0, done.stderr
    assert "a table for each joint, layer published" in done.stdout
    assert "111 or 135" in done.stdout
    assert "Version 1, 2026-12-01" in done.stdout
    assert "process-efficiency.yaml:1:1" in done.stdout
    done = run("show", "process-efficency", cwd=started)
    assert (done.returncode, "Did you mean 'process-efficiency'?" in done.stderr) == (2, True)


def test_watching_looks_again_when_a_file_is_saved(tmp_path: Path) -> None:
    run("start", "--house", "yard", cwd=tmp_path)
    words = [sys.executable, "-u", "-m", "weldbasis.cli.main", "vet", "yard", "--quiet", "--watch"]
    with subprocess.Popen(words, cwd=tmp_path, stdout=subprocess.PIPE, text=True, encoding="utf-8") as watching:
        assert watching.stdout is not None
        try:
            assert any("0 findings that stop work" in line for line in iter(watching.stdout.readline, ""))
            file = tmp_path / "yard/amendments.yaml"
            file.write_text(file.read_text(encoding="utf-8").replace("how: add", "how: tighten"), encoding="utf-8")
            assert any("there is no rule 'house-thick" in line for line in iter(watching.stdout.readline, ""))
        finally:
            watching.kill()


def test_every_command_teaches(started: Path) -> None:
    for name in COMMANDS:
        done = run(name, "--help", cwd=started)
        assert done.returncode == 0
        assert len(done.stdout.splitlines()) >= 8


def test_readme_names_every_command() -> None:
    readme = (site_folder().parent / "README.md").read_text(encoding="utf-8")
    assert all(f"weldbasis {name}" in readme for name in COMMANDS)
