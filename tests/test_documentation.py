"""README and DEVELOPERS as they stand: their snippets run, and what README says is printed is printed."""

import contextlib
import io
import re
import shlex
from pathlib import Path

import pytest

from leanloop.cli import main
from leanloop.equilibrium import MODELS
from leanloop.recycle import METHODS
from leanloop.units import KINDS

ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")


def blocks(text, language):
    return re.findall(rf"^```{language}\n(.*?)^```$", text, re.M | re.S)


def printed(arguments):
    out = io.StringIO()
    with contextlib.redirect_stdout(out):
        code = main(arguments)
    return code, out.getvalue()


def settled(text):
    """Text without the digits that are rounding: residuals and closures."""
    text = re.sub(r"residual \S+ of", "residual # of", text)
    return re.sub(r"(?m)^(  \S+ +[\d.e+-]+ +[\d.e+-]+) +\S+$", r"\1 #", text)


@pytest.fixture(autouse=True)
def at_the_root(monkeypatch):
    monkeypatch.chdir(ROOT)


def test_readme_shows_the_real_output():
    shown = re.search(r"<!-- output -->\n```text\n(.*?)^```$", README, re.M | re.S)[1]
    code, now = printed(["solve", "flowsheets/coating_vent.toml"])
    assert code == 0
    assert settled(shown) == settled(now)


def test_the_two_commands_are_one_line_each():
    for name in ("run", "tests"):
        block = re.search(rf"<!-- {name} -->\n```sh\n(.*?)^```$", README, re.M | re.S)[1]
        assert len(block.splitlines()) == 1
        assert block.startswith("python3 -m venv ")
    assert "leanloop solve flowsheets/coating_vent.toml" in README


@pytest.mark.parametrize("number", range(len(blocks(README, "python"))))
def test_readme_snippets_run(number):
    out = io.StringIO()
    with contextlib.redirect_stdout(out):
        exec(compile(blocks(README, "python")[number], f"README snippet {number}", "exec"), {})
    assert out.getvalue()


@pytest.mark.parametrize("number", range(len(blocks(README, "toml"))))
def test_readme_flowsheets_solve(number, tmp_path):
    path = tmp_path / "sheet.toml"
    block = blocks(README, "toml")[number]
    if "[units." not in block:  # sections to go with the example
        block = (ROOT / "flowsheets" / "coating_vent.toml").read_text(encoding="utf-8").split("[studies.")[0] + block
    path.write_text(block, encoding="utf-8")
    code, now = printed(["solve", str(path)])
    assert code == 0
    assert "converged" in now


def test_commands_named_in_readme_exist():
    for line in "".join(blocks(README, "sh")).splitlines():
        if line.startswith("leanloop "):
            command = shlex.split(line, comments=True)[1]
            with contextlib.redirect_stdout(io.StringIO()) as out, pytest.raises(SystemExit) as end:
                main([command, "--help"])
            assert end.value.code == 0
            for option in re.findall(r"--[a-z]+", line.split("#")[0]):
                assert option in out.getvalue(), (command, option)


def test_developers_snippets_run():
    snippets = blocks(DEVELOPERS, "python")
    tables = (KINDS, MODELS, METHODS)
    before = [set(table.names()) for table in tables]
    try:
        for snippet in snippets:
            exec(compile(snippet, "DEVELOPERS snippet", "exec"), {})
        for table, names in zip(tables, before, strict=True):
            assert len(set(table.names()) - names) == 1
    finally:
        for table, names in zip(tables, before, strict=True):
            for name in set(table.names()) - names:
                table.remove(name)


def test_named_files_exist():
    for text in (README, DEVELOPERS):
        for name in re.findall(r"`((?:flowsheets|tests)/[\w./]+)`", text):
            assert (ROOT / name).exists(), name
