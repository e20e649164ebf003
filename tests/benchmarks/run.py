"""Makes the speed figures that the repository keeps: ``python -m tests.benchmarks.run``.

Writes ``figures.md`` beside this file (some ten minutes, most of them plain routes of derivation that
are stopped; ``--only fits`` or ``--only derivation`` makes one part and keeps the other). Run it on
an otherwise idle machine.
"""

from __future__ import annotations

import argparse
import datetime
import os
import platform
import re
import resource
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np

from tests.benchmarks import derive_speed, interval_speed
from tests.benchmarks.fit_speed import RUNS, STARTS, ratios

HERE = Path(__file__).parent
DEMO = HERE.parents[1] / "demo" / "buffer-hydrolysis" / "first.toml"
IMPORTS = "import scipy.optimize, sympy, pandas, matplotlib.pyplot"


def seconds(command: list[str], cache: str, times: int = 5) -> float:
    """Median processor time of a command, with its byte code in place as an installed package has it.

    ``cache``: a folder for the byte code, which the first run fills.
    """
    environment = {k: v for k, v in os.environ.items() if k != "PYTHONDONTWRITEBYTECODE"}
    environment["PYTHONPYCACHEPREFIX"] = cache
    took = []
    for _ in range(times + 1):
        before = resource.getrusage(resource.RUSAGE_CHILDREN)
        subprocess.run(command, check=True, stdout=subprocess.DEVNULL, env=environment)
        after = resource.getrusage(resource.RUSAGE_CHILDREN)
        took.append(after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime)
    return float(np.median(took[1:]))


def made_by(command: str) -> str:
    return (
        f"{datetime.date.today().isoformat()}, {platform.machine()}, {os.cpu_count()} cores, Python "
        f"{platform.python_version()}, numpy {np.__version__}. Made by `{command}`."
    )


def fits() -> list[str]:
    """Fits, intervals and the first demo."""
    fit = ratios()
    intervals = interval_speed.ratios()
    with tempfile.TemporaryDirectory() as folder:
        weigh = seconds(
            [sys.executable, "-m", "discrim", "weigh", str(DEMO), "--out", f"{folder}/results"],
            f"{folder}/byte code",
        )
        bare = seconds([sys.executable, "-c", IMPORTS], f"{folder}/byte code")
    return [
        "## Fits, intervals and the first demo",
        "",
        made_by("python -m tests.benchmarks.run --only fits"),
        "",
        f"One fit of a derived four-constant law (two adsorbed reactants, product inhibits) on {RUNS} "
        f"runs from the same {STARTS} starts; medians over nine tables. Plain: "
        "scipy.optimize.least_squares with bounds and finite differences. Expert: MINPACK through "
        '`method="lm"` on logarithms of the constants with exact derivatives.',
        "",
        "| what | figure | asked |",
        "| --- | --- | --- |",
        f"| fit, discrim | {1e3 * fit['seconds']:.2f} ms | |",
        f"| fit, plain script | {1e3 * fit['plain seconds']:.0f} ms | |",
        f"| fit, expert script | {1e3 * fit['expert seconds']:.1f} ms | |",
        f"| times faster than plain | {fit['times faster than plain']:.0f} | 50 |",
        f"| times faster than expert | {fit['times faster than expert']:.1f} | 5 |",
        f"| tables with an optimum as good as any | {100 * fit['best optimum reached']:.0f} % | |",
        f"| all intervals of five constants, 24 runs with condition errors | "
        f"{1e3 * intervals['interval seconds']:.0f} ms | |",
        f"| its fit from {interval_speed.STARTS} starts | {1e3 * intervals['fit seconds']:.1f} ms | |",
        f"| intervals over fit, median of nine tables (worst {intervals['worst']:.0f}) | "
        f"{intervals['intervals over fit']:.0f} | at most 30 |",
        f"| `discrim weigh` on the first demo, processor time | {weigh:.2f} s | |",
        f"| bare imports (`{IMPORTS}`), processor time | {bare:.2f} s | |",
        f"| weigh over imports | {weigh / bare:.2f} | at most 4 |",
        "",
    ]


def derivation() -> list[str]:
    head, _, *rest = derive_speed.lines()
    return [head, "", made_by("python -m tests.benchmarks.run --only derivation"), "", *rest]


PARTS = {"fits": fits, "derivation": derivation}


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--only", choices=list(PARTS))
    only = parser.parse_args().only
    file = HERE / "figures.md"
    # parts begin with a heading of the second level
    _, *kept = re.split(r"(?m)^(?=## )", file.read_text(encoding="utf-8"))
    lines = ["# Speed", ""]
    for k, (name, make) in enumerate(PARTS.items()):
        lines += make() if only in (None, name) else [*kept[k].rstrip("\n").split("\n"), ""]
    file.write_text("\n".join(lines).rstrip("\n") + "\n", encoding="utf-8")
    print("\n".join(lines))


if __name__ == "__main__":
    main()
