"""docs/commands.md, made from the program so that the two cannot differ.

In: the commands. Out: Markdown. `python -m fieldround.cli.reference > docs/commands.md`
"""

from __future__ import annotations

import inspect
from collections.abc import Iterator

import click

HEAD = """\
# Commands

Made from the program: `python -m fieldround.cli.reference > docs/commands.md`.
"""


def commands_page(group: click.Group) -> str:
    """The page: one section a command, with its arguments and options."""
    parts = [HEAD]
    for path, command in every_command(group, "fieldround"):
        parts.append(_section(path, command))
    return "\n".join(parts)


def every_command(command: click.Command, path: str) -> Iterator[tuple[str, click.Command]]:
    """The command and everything below it, each with what a person types."""
    yield path, command
    if isinstance(command, click.Group):
        context = click.Context(command, info_name=path)
        for name in command.list_commands(context):
            below = command.get_command(context, name)
            assert below is not None
            yield from every_command(below, f"{path} {name}")


def _section(path: str, command: click.Command) -> str:
    arguments = [
        parameter.metavar or (parameter.name or "").upper()
        for parameter in command.params
        if isinstance(parameter, click.Argument)
    ]
    usage = " ".join([path, *arguments, "[options]"])
    if isinstance(command, click.Group):
        usage = f"{path} COMMAND"
    lines = [f"## {path}", "", f"`{usage}`", "", inspect.cleandoc(command.help or ""), ""]
    options = [p for p in command.params if isinstance(p, click.Option)]
    if options:
        lines += ["| option | what it does |", "|---|---|"]
        lines += [f"| {_typed(option)} | {option.help or ''} |" for option in options]
        lines.append("")
    return "\n".join(lines)


def _typed(option: click.Option) -> str:
    choices = getattr(option.type, "choices", None)
    value = "" if option.is_flag else f" {option.metavar or option.type.name.upper()}"
    if choices:
        value = f" {' or '.join(map(str, choices))}"
    return ", ".join(f"`{name}{value}`" for name in option.opts)


if __name__ == "__main__":
    from fieldround.cli.main import main

    print(commands_page(main), end="")
