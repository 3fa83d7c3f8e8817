"""The command line: one short file a command, loaded only when it is asked for."""

from __future__ import annotations

from importlib import import_module

import click

from schorl import __version__

#: Command, and its line in ``schorl --help`` (kept here so that help loads nothing else).
COMMANDS = {
    "new": "Write a job file from a boundary and a laboratory file.",
    "check": "List everything the checks notice, without making rates.",
    "prescribe": "Make the prescription: surfaces, zones, rates, files, report.",
    "verify": "Say whether a pack or file is whole, valid and what its record says.",
    "adapt": "Bring a pack to another product, machine or controller, never with more boron.",
    "compare": "Say what changed between seasons, whether it is real, and what to do.",
    "tissue": "Say by leaf and brix checks where a foliar pass is warranted, and prescribe it.",
    "tables": "Show the figures Schorl works with, each with its source.",
    "explain": "Explain a finding code in full.",
}


class LazyGroup(click.Group):
    """A group that imports a command's module only when the command runs."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Commands in the order of work."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """The command of that name, imported now."""
        if cmd_name not in COMMANDS:
            return None
        module = import_module(f"schorl.cli.{cmd_name}_command")
        command: click.Command = module.command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """The list of commands, from the table above instead of from their modules."""
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


@click.group(cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="schorl")
def main() -> None:
    """Turn a field's soil samples into a variable-rate boron prescription.

    Start with `schorl new FOLDER --boundary B --samples S --crop NAME`, or go straight to
    `schorl prescribe` with the same options. Each command's --help ends with examples.
    """
