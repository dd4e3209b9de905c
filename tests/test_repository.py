"""What holds for the repository as a whole: its top level, its words, its README, its help."""

from __future__ import annotations

import re
import subprocess
import sys
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import click
import pytest

from fieldround.cli.main import main
from fieldround.cli.reference import commands_page, every_command

ROOT = Path(__file__).resolve().parents[1]
TOP = {
    "README.md", "DEVELOPERS.md", "LICENSE", "CHANGELOG.md", "pyproject.toml", "fieldround",
    "tests", "demo_site", "docs", ".ci",
}  # fmt: skip
DOT_FILES = {".gitignore", ".gitattributes", ".editorconfig"}
COMMANDS = (
    "python3 -m venv .venv && .venv/bin/pip install -q . && .venv/bin/fieldround run demo_site",
    "python3 -m venv .venv && .venv/bin/pip install -q '.[test]' && .venv/bin/pytest -q",
)
HEAVY = {"cv2", "geopandas", "folium", "scipy", "pyproj", "numpy", "pandas", "shapely", "PIL"}

# Written in pieces, so that this file does not contain what it looks for.
REGISTRIES = [
    name + "." + end
    for name, end in (
        ("pypi", "org"), ("pythonhosted", "org"), ("npmjs", "com"), ("npmjs", "org"),
        ("jsdelivr", "net"), ("unpkg", "com"), ("cdnjs", "com"), ("cloudflare", "com"),
        ("bootstrapcdn", "com"), ("googleapis", "com"), ("gstatic", "com"), ("jquery", "com"),
        ("crates", "io"), ("anaconda", "org"), ("conda", "io"),
    )
]  # fmt: skip
MACHINE_PATHS = [rf"(?<![\w.])/{first}/" for first in ("work", "root", "home", "Users")]
MACHINE_PATHS += [r"(?<![\w.])/tmp" + "/dev", r"[A-Za-z]:\\" + r"Users\\"]


def tracked() -> list[str]:
    try:
        done = subprocess.run(
            ["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, text=True, check=True
        )
    except (OSError, subprocess.CalledProcessError):
        pytest.skip("this is not a git checkout")
    return [name for name in done.stdout.split("\0") if name and (ROOT / name).exists()]


@cache
def texts() -> tuple[tuple[str, str], ...]:
    """Name and text of every tracked file that is text."""
    found = []
    for name in tracked():
        content = (ROOT / name).read_bytes()
        if b"\0" not in content[:4096]:
            try:
                found.append((name, content.decode("utf-8")))
            except UnicodeDecodeError:
                continue
    return tuple(found)


def places(patterns: list[str]) -> list[str]:
    """File, line and text of every match in the tracked texts."""
    wanted = re.compile("|".join(patterns))
    return [
        f"{name}, line {number}: {line.strip()[:120]}"
        for name, text in texts()
        for number, line in enumerate(text.splitlines(), start=1)
        if wanted.search(line)
    ]


def commands() -> Iterator[tuple[str, click.Command]]:
    return every_command(main, "fieldround")


def test_the_top_level_holds_what_it_should_and_nothing_else() -> None:
    top = {name.split("/")[0] for name in tracked()}
    assert top - DOT_FILES == TOP


def test_no_text_names_a_path_of_some_machine() -> None:
    assert places(MACHINE_PATHS) == []


def test_no_text_names_a_package_registry_or_content_host() -> None:
    assert places([re.escape(host) for host in REGISTRIES]) == []


def test_the_search_for_unwanted_text_finds_it() -> None:
    home = "/" + "home/someone/round"
    assert re.search("|".join(MACHINE_PATHS), f"see {home}")
    assert not re.search("|".join(MACHINE_PATHS), "see demo_site/work/ and out/home/x")
    assert re.search(re.escape(REGISTRIES[3]), "https://registry.npmjs" + ".org/x")
    assert len(texts()) > 50


def test_the_readme_gives_both_commands_whole_and_once() -> None:
    lines = (ROOT / "README.md").read_text(encoding="utf-8").splitlines()
    for command in COMMANDS:
        assert lines.count(command) == 1
    assert [line for line in lines if line.startswith("python3 -m venv")] == list(COMMANDS)


def test_the_readme_states_the_job_first() -> None:
    paragraphs = (ROOT / "README.md").read_text(encoding="utf-8").split("\n\n")
    assert paragraphs[0].startswith("# ")
    assert len(paragraphs[1].split()) > 40


def test_the_page_of_commands_is_what_the_program_says() -> None:
    page = (ROOT / "docs" / "commands.md").read_text(encoding="utf-8")
    assert page == commands_page(main), (
        "make it again: python -m fieldround.cli.reference > docs/commands.md"
    )


def test_every_command_and_option_has_help() -> None:
    silent = []
    for path, command in commands():
        if not (command.help or "").strip():
            silent.append(path)
        for parameter in command.params:
            if isinstance(parameter, click.Option) and not (parameter.help or "").strip():
                silent.append(f"{path} {parameter.opts[0]}")
    assert silent == []
    assert {"fieldround run", "fieldround camera keep"} <= {path for path, _ in commands()}


@pytest.mark.parametrize("arguments", [["--help"], ["--version"], ["run", "--help"]])
def test_help_imports_nothing_heavy(arguments: list[str]) -> None:
    code = (
        "import sys\nfrom fieldround.cli.main import main\n"
        f"try:\n    main({arguments!r})\nexcept SystemExit as end:\n    assert not end.code\n"
        f"print('HEAVY', sorted(set(sys.modules) & {HEAVY!r}))"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True
    )
    assert done.stdout.splitlines()[-1] == "HEAVY []"


def test_the_continuous_check_can_be_started() -> None:
    script = ROOT / ".ci" / "run"
    assert script.stat().st_mode & 0o111
    subprocess.run(["bash", "-n", str(script)], check=True)
