"""What a person at the command line did wrong, said in one sentence."""

from __future__ import annotations

import click


class UserMistake(click.ClickException):
    """Shown on standard error as one sentence; the exit status is 2, as for arguments that cannot be read."""

    exit_code = 2
