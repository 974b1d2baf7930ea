"""The README stays true: commands, printed output, Python."""

from __future__ import annotations

import doctest
import importlib.util
import re
from pathlib import Path

import gasphys

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def _tool():
    spec = importlib.util.spec_from_file_location("update_readme", ROOT / ".ci" / "update_readme.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def test_printed_output_is_what_the_commands_print() -> None:
    assert len(re.findall("<!-- output: ", README)) == 2
    assert _tool().renewed(README) == README


def test_exactly_two_commands() -> None:
    commands = re.findall(r"```sh\n(.*?)```", README, flags=re.DOTALL)
    assert len(commands) == 2
    assert "-m gasphys review notebooks/data/dive_in_the_sound.csv" in commands[0]
    assert "-m pytest" in commands[1]
    for command in commands:
        assert "venv" in command
        assert "pip install" in command


def test_python_of_the_tour() -> None:
    flags = doctest.ELLIPSIS | doctest.NORMALIZE_WHITESPACE
    failures, tried = doctest.testfile(str(ROOT / "README.md"), module_relative=False, optionflags=flags)
    assert tried >= 10
    assert failures == 0


def test_figure_and_caution() -> None:
    figure = re.search(r"!\[[^\]]+\]\(([^)]+)\)", README)
    assert figure is not None
    assert (ROOT / figure[1]).read_bytes().startswith(b"\x89PNG")
    assert "Never the sole basis for a dive or a treatment" in " ".join(README.replace(">", "").split())


def test_version_is_one() -> None:
    assert re.fullmatch(r"\d+\.\d+\.\d+", gasphys.__version__)
