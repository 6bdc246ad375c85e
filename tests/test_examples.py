"""Every command's help has an example; each runs on the demo, in the order of the help."""

import argparse
import glob
import re
import shlex
import shutil
from pathlib import Path

from fieldgen.cli import main, make_parser

ROOT = Path(__file__).parents[1]


def examples() -> dict[str, str]:
    """Example of each command, from its help."""
    actions = make_parser()._actions
    (commands,) = (one for one in actions if isinstance(one, argparse._SubParsersAction))
    return {
        name: parser.epilog.removeprefix("example: fieldgen ")
        for name, parser in commands.choices.items()
    }


def words_of(example: str) -> list[str]:
    """Arguments of an example as the shell hands them over."""
    words = []
    for word in shlex.split(example):
        words += sorted(glob.glob(word)) if "*" in word else [word]
    return words


def test_the_example_of_every_command_works(tmp_path, monkeypatch, capsys):
    """Round trip: exit status 0, and something printed or written. `make` and `update` come first
    and leave what the others need; to be quick, they draw the latest map alone."""
    demo = tmp_path / "demo_network"
    shutil.copytree(ROOT / "demo_network", demo, ignore=shutil.ignore_patterns("truth", "*.py"))
    settings = (demo / "network.toml").read_text()
    (demo / "network.toml").write_text(settings.replace('maps = "all"', 'maps = "latest"'))
    monkeypatch.chdir(tmp_path)
    written = set()
    for name, example in examples().items():
        assert main(words_of(example)) == 0, f"fieldgen {example}"
        files = {path for path in (tmp_path / "outputs").rglob("*") if path.is_file()}
        assert capsys.readouterr().out or files - written, f"{name} shows nothing"
        written = files


def test_the_readme_names_every_command():
    """A second source: the usage block of the README."""
    readme = (ROOT / "README.md").read_text()
    assert set(examples()) == set(re.findall(r"^fieldgen (\w+) (?:[A-Z]+)", readme, re.MULTILINE))
