"""The command `fieldround`: its subcommands, each loaded only when it is asked for.

In: the command line. Out: an exit code. 0: the work was done, whatever the verdicts; 1: the work
failed; 2: the sheets or the command line are wrong.
"""

from __future__ import annotations

from importlib import import_module

import click

from fieldround import __version__

# Name -> module:object. The modules import nothing heavy at their top, so that help is quick.
COMMANDS = {
    "start": "fieldround.cli.start_command:start",
    "run": "fieldround.cli.run_command:run",
    "lists": "fieldround.cli.lists_command:lists",
    "camera": "fieldround.cli.camera_commands:camera",
}


class LateCommands(click.Group):
    """A group whose commands are imported when they are asked for."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Names in the order of the work."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """The command of a name, None when there is none."""
        if cmd_name not in COMMANDS:
            return None
        module, name = COMMANDS[cmd_name].split(":")
        command = getattr(import_module(module), name)
        assert isinstance(command, click.Command)
        return command


@click.group(
    cls=LateCommands,
    context_settings={"help_option_names": ["--help", "-h"], "max_content_width": 100},
)
@click.version_option(
    __version__, message="fieldround %(version)s", help="Show the version and exit."
)
def main() -> None:
    """Size and place round objects from pairs of photos, with an interval for every figure."""


if __name__ == "__main__":
    main()
