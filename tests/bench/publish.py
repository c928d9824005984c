"""Publish 1,000 joints, against mkdocs with the same theme building as many plain pages of 3 kB.

Run: python tests/bench/publish.py [joints]. Prints seconds of both, their ratio (goal at most 0.5) and the peak memory
of publishing (goal at most 1 GiB). Each runs in a process of its own, so that neither warms the other up.
"""

from __future__ import annotations

import csv
import subprocess
import sys
import tempfile
import time
from contextlib import suppress
from pathlib import Path

import psutil

from weldbasis.places import site_folder

PLAIN = """site_name: plain
site_url: ""
use_directory_urls: false
theme: {name: material, font: false}
plugins: [search, offline]
not_in_nav: "/pages/*"
nav: [index.md]
extra: {polyfills: [iframe-worker-none.js], generator: false}
"""


def make_project(folder: Path, joints: int) -> None:
    """The fabrication example with its weld list repeated under new names."""
    source = site_folder() / "projects" / "tideway-gates"
    text = (source / "project.yaml").read_text(encoding="utf-8")
    (folder / "project.yaml").write_text(text, encoding="utf-8")
    (folder / "certificates.csv").write_bytes((source / "certificates.csv").read_bytes())
    rows = list(csv.reader((source / "welds.csv").open(encoding="utf-8")))
    with (folder / "welds.csv").open("w", encoding="utf-8", newline="") as out:
        writer = csv.writer(out)
        writer.writerow(rows[0])
        for number in range(joints):
            row = list(rows[1 + number % (len(rows) - 1)])
            writer.writerow([f"{row[0]}-{number:04d}", *row[1:]])


def make_plain(folder: Path, pages: int) -> None:
    """Plain Markdown pages of about 3 kB: a heading, a table, four sections, links."""
    (folder / "mkdocs.yml").write_text(PLAIN, encoding="utf-8")
    docs = folder / "docs"
    (docs / "pages").mkdir(parents=True)
    (docs / "index.md").write_text("# Home\n", encoding="utf-8")
    table = "| a | b | c | d | e |\n|---|---|---|---|---|\n" + "| 12.5 | text | 0.36 | more text | 110 |\n" * 12
    words = "The minimum holds before every run, so it is also the minimum between runs, with [a link](p0.md). "
    for number in range(pages):
        sections = "".join(f"\n## Section {part}\n\n{words * 5}\n" for part in range(4))
        (docs / "pages" / f"p{number}.md").write_text(f"# Page {number}\n\n{table}{sections}", encoding="utf-8")


def memory_of(process: psutil.Process) -> int:
    """Bytes of a process; what forks share counts once where the system tells (Linux), else once in each."""
    info = process.memory_full_info()
    return int(getattr(info, "pss", info.rss))


def run(*words: str) -> tuple[float, float]:
    """Seconds and peak memory in MiB of a command and its children."""
    start = time.perf_counter()
    process = psutil.Popen([sys.executable, "-m", *words], stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
    peak = 0
    while process.poll() is None:
        with suppress(psutil.NoSuchProcess, psutil.AccessDenied):  # a child may end in between
            peak = max(peak, sum(map(memory_of, [process, *process.children(recursive=True)])))
        time.sleep(0.1)
    if process.wait() != 0:
        raise SystemExit(f"{' '.join(words)} failed")
    return time.perf_counter() - start, peak / 2**20


def main() -> None:
    """Build both and compare."""
    joints = int(sys.argv[1]) if len(sys.argv) > 1 else 1000
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        (folder / "project").mkdir()
        (folder / "plain").mkdir()
        make_project(folder / "project", joints)
        make_plain(folder / "plain", joints)
        plain, _ = run("mkdocs", "build", "-q", "-f", str(folder / "plain" / "mkdocs.yml"))
        ours, memory = run("weldbasis.cli.main", "publish", str(folder / "project"), "--to", str(folder / "out"))
    print(f"{joints} joints: {ours:.1f} s, plain pages {plain:.1f} s, ratio {ours / plain:.2f} (goal at most 0.5)")
    print(f"peak memory {memory:.0f} MiB (goal at most 1024)")


if __name__ == "__main__":
    main()
