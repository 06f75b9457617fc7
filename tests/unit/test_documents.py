"""README, command line and CI tell one story."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import typer

from pricer.cli.app import app

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def test_every_command_and_option_stands_in_the_readme():
    group = typer.main.get_command(app)
    for name, command in group.commands.items():
        assert f"pricer {name}" in README, name
        for parameter in command.params:
            for option in parameter.opts:
                assert not option.startswith("--") or option == "--help" or option in README, option


def test_the_readme_names_two_commands_that_ci_runs():
    assert re.findall(r"<!-- command: (.*?) -->\n```sh\n", README) == ["main job", "tests"]
    assert (ROOT / ".ci" / "run").read_text(encoding="utf-8").count("command_in_readme ") == 2


def test_help_loads_neither_engine_nor_tables():
    code = (
        "import sys; from typer.testing import CliRunner; from pricer.cli.app import app;"
        "CliRunner().invoke(app, ['--help']);"
        "print([m for m in ('numpy', 'scipy', 'pandas', 'numba', 'QuantLib', 'openpyxl') if m in sys.modules])"
    )
    shown = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert shown.stdout.strip() == "[]"


def test_the_library_offers_what_the_readme_uses():
    import pricer

    for name in re.findall(r"pricer\.([A-Za-z_]+)", README):
        assert hasattr(pricer, name), name
