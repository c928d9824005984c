"""`weldbasis why` on one joint from a cold start, and `weldbasis vet` on the whole knowledge base.

Run: python tests/bench/start_up.py. Prints the best of five in seconds beside the start of a bare interpreter with
NumPy in the same run; goals are 1.0 s and 5 s.
"""

from __future__ import annotations

import subprocess
import sys
import time

from weldbasis.places import site_folder


def best(words: list[str], times: int) -> float:
    """Least seconds of several runs of a command."""
    seconds = []
    for _ in range(times):
        start = time.perf_counter()
        subprocess.run([sys.executable, *words], stdout=subprocess.DEVNULL, check=True)
        seconds.append(time.perf_counter() - start)
    return min(seconds)


def main() -> None:
    """Time the commands and the bare interpreter."""
    bare = best(["-c", "import numpy"], 5)
    project = str(site_folder() / "projects" / "millrace-footbridge")
    why = best(["-m", "weldbasis.cli.main", "why", project, "N6"], 5)
    vetted = best(["-m", "weldbasis.cli.main", "vet", "--quiet"], 3)
    print(f"interpreter with NumPy {bare:.2f} s")
    print(f"why {why:.2f} s, ratio {why / bare:.1f} (goal at most 1.0 s)")
    print(f"vet {vetted:.2f} s, ratio {vetted / bare:.1f} (goal at most 5 s)")


if __name__ == "__main__":
    main()
