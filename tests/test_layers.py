"""Imports run downwards, without circles, and the light ones stay light."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import fieldgen

ROOT = Path(fieldgen.__file__).parent

LAYERS = [
    ["errors", "constants", "quantities", "memory", "input_files", "plain_text", "processes"],
    ["kriging", "station"],
    ["settings"],
    ["ground"],
    ["readers"],
    ["products"],
    ["retrieval", "analysis", "period"],
    ["fields"],
    ["report"],
    ["upkeep"],
    ["day_maker"],
    ["chain", "draws", "summary", "progress", "text_table", "scoring"],
    ["log", "update", "status"],
    ["comparing", "outreach", "areas", "exporting"],
    ["commands"],
    ["cli"],
]
"""From the bottom to the top; a module may import its own layer and those below."""

MODULES = sorted(
    ".".join(("fieldgen", *path.relative_to(ROOT).with_suffix("").parts))
    for path in ROOT.rglob("*.py")
    if path.name not in ("__init__.py", "__main__.py")
)

HEAVY = ("matplotlib", "cartopy", "pykrige", "rasterio", "xarray", "pandas", "scipy", "bokeh")


def level(module: str) -> int:
    part = module.split(".")[1]
    return next(index for index, names in enumerate(LAYERS) if part in names)


def imports(module: str) -> set[str]:
    """fieldgen modules that a module's source imports."""
    tree = ast.parse((ROOT.parent / f"{module.replace('.', '/')}.py").read_text())
    return {
        node.module
        for node in ast.walk(tree)
        if isinstance(node, ast.ImportFrom) and (node.module or "").startswith("fieldgen.")
    }


@pytest.mark.parametrize("module", MODULES)
def test_imports_run_downwards(module):
    """The picture in DEVELOPERS.md, read from the sources."""
    for other in imports(module):
        assert level(other) <= level(module), f"{module} imports {other}"


def test_there_are_no_circles():
    """A second derivation: the graph of imports can be sorted."""
    from graphlib import TopologicalSorter

    list(TopologicalSorter({module: imports(module) for module in MODULES}).static_order())


def test_each_module_imports_alone():
    """Every module in a fresh interpreter, so that none leans on another's imports."""
    code = (
        "import subprocess, sys\n"
        "for name in sys.argv[1:]:\n"
        "    if subprocess.run([sys.executable, '-c', f'import {name}']).returncode:\n"
        "        sys.exit(name)\n"
    )
    light = [name for name in MODULES if level(name) < 3]
    subprocess.run([sys.executable, "-c", code, *light], check=True)


def test_the_command_line_starts_light():
    """`import fieldgen` and `fieldgen --help` load nothing heavy."""
    code = (
        "import sys, fieldgen, fieldgen.cli\n"
        "try:\n    fieldgen.cli.main(['--help'])\nexcept SystemExit:\n    pass\n"
        f"print([name for name in {HEAVY} if name in sys.modules], file=sys.stderr)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stderr.strip() == "[]"
