"""The command group. It knows the subjects by name and imports one when it is called."""

from __future__ import annotations

import importlib
import os

# Before numpy is imported anywhere: on matrices of order 30 its threads cost a start more than they give.
for _variable in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_variable, "1")

import click  # noqa: E402  the variables above come first on purpose

from service.command.errors import UserMistake  # noqa: E402  see above
from service.documents.version import SERVICE_VERSION  # noqa: E402  see above
from service.settings import SettingsError  # noqa: E402  see above

SUBJECTS: dict[str, tuple[str, str]] = {
    "account": ("service.command.account", "Make accounts and look after them."),
    "backup": ("service.command.backup", "Copy a SQLite store into one file while the service runs."),
    "demo": ("service.command.demo", "Show the service on an invented plant."),
    "history": ("service.command.history", "Verify and export the history of the records."),
    "key": ("service.command.key", "Make, show and change the key that signs checkpoints."),
    "migrate": ("service.command.migrate", "Bring the database to the current schema."),
    "recompute": ("service.command.recompute", "Recompute stability and margins of loops from files."),
    "restore": ("service.command.backup", "Make a SQLite store from a backup."),
    "serve": ("service.command.serve", "Run the service."),
    "token": ("service.command.token", "Issue, list and revoke tokens for the API."),
}
"""Command → (module, its line in the help). In the module, a click command has the same name."""


class LazyGroup(click.Group):
    """A group that imports a command when it is called, and none to print the list of them."""

    def invoke(self, ctx: click.Context) -> object:
        """Run the command; a setting that cannot be used is the mistake of whoever set it."""
        try:
            return super().invoke(ctx)
        except SettingsError as refused:
            raise UserMistake(str(refused)) from None

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Name the subjects."""
        return sorted(SUBJECTS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import the command's module and return the command, None where there is no such command."""
        if cmd_name not in SUBJECTS:
            return None
        command = getattr(importlib.import_module(SUBJECTS[cmd_name][0]), cmd_name)
        assert isinstance(command, click.Command)  # noqa: S101  a fault of ours, not of the user
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Print the list of commands from the table alone."""
        with formatter.section("Commands"):
            formatter.write_dl([(name, SUBJECTS[name][1]) for name in self.list_commands(ctx)])


@click.group(cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(SERVICE_VERSION, prog_name="gain-signoff")
def main() -> None:
    """Recompute, sign and keep the changes of a plant's PID gains."""
