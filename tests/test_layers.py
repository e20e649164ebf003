"""Imports run one way, down the list of layers; the command line starts without numerical libraries."""

import ast
import re
import subprocess
import sys
from pathlib import Path

import pytest

PACKAGE = Path(__file__).resolve().parents[1] / "discrim"
LAYERS = (
    "errors units executor mechanism ratelaw runs reactor fit evidence verdict plan study weigh "
    "screen report cli"
).split()


def imported(path):
    """(layer imported, line) for every import of the package in a file, also inside functions."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.ImportFrom) and node.module and node.level == 0:
            names = [node.module]
            if node.module == "discrim":
                names = [f"discrim.{a.name}" for a in node.names]
        elif isinstance(node, ast.Import):
            names = [a.name for a in node.names]
        else:
            continue
        for name in names:
            parts = name.split(".")
            if parts[0] == "discrim" and len(parts) > 1 and parts[1] in LAYERS:
                yield parts[1], node.lineno


def test_imports_run_down_the_layers():
    wrong = []
    for path in sorted(PACKAGE.rglob("*.py")):
        layer = path.relative_to(PACKAGE).parts[0].removesuffix(".py")
        if layer not in LAYERS:
            continue
        for other, line in imported(path):
            if LAYERS.index(other) > LAYERS.index(layer):
                wrong.append(f"{path.relative_to(PACKAGE)}:{line} imports {other}")
    assert not wrong


def test_fits_and_evidence_know_of_chemistry_only_the_seam():
    chemistry = {"units", "mechanism", "ratelaw", "runs"}
    wrong = [
        f"{path.relative_to(PACKAGE)}:{line} imports {other}"
        for layer in ("fit", "evidence")
        for path in sorted((PACKAGE / layer).glob("*.py"))
        for other, line in imported(path)
        if other in chemistry
    ]
    assert not wrong


def test_the_map_names_every_module():
    text = (PACKAGE.parent / "DEVELOPERS.md").read_text(encoding="utf-8")
    map_ = text.partition("## Map")[2].partition("\n## ")[0]
    named = set(re.findall(r"`([a-z_]+)`", map_))
    stems = {
        path.stem
        for path in PACKAGE.glob("*/*.py")
        if path.parent.name != "cli" and not path.stem.startswith("_")
    }
    assert not stems - named


@pytest.mark.parametrize("argument", ["--version", "--help"])
def test_starts_without_numerical_libraries(argument):
    code = (
        "import sys; sys.argv = ['discrim', sys.argv[1]]\n"
        "from discrim.cli import main\n"
        "try:\n    main()\nexcept SystemExit as e:\n    assert not e.code\n"
        "heavy = {'numpy', 'scipy', 'sympy', 'pandas', 'matplotlib', 'pint', 'statsmodels'}\n"
        "assert not heavy & set(sys.modules), heavy & set(sys.modules)\n"
    )
    done = subprocess.run([sys.executable, "-c", code, argument], capture_output=True, text=True)
    assert done.returncode == 0, done.stderr
