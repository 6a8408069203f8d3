"""All commands as one: their order in the help, and what ends a command turned into one line and an exit code."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

import typer
from typer.core import TyperGroup

from codesign.cli_overview import OVERVIEW, in_order
from codesign.cli_terminal import interrupts
from codesign.errors import CodesignError

INTERRUPTED = 130


class Commands(TyperGroup):
    """All commands, with errors translated in this one place; bugs keep their traceback."""

    def list_commands(self, ctx: Any) -> list[str]:
        return in_order(super().list_commands(ctx))

    def get_command(self, ctx: Any, cmd_name: str) -> Any:
        command = super().get_command(ctx, cmd_name)
        if command is not None:
            command.short_help = OVERVIEW.get(cmd_name)
        return command

    def make_context(self, info_name: str | None, args: list[str], parent: Any = None, **extra: Any) -> Any:
        try:
            return super().make_context(info_name, args, parent, **extra)
        except Exception as error:
            if isinstance(error, typer.Exit):
                raise
            _end(error, interrupted=False)

    def invoke(self, ctx: Any) -> Any:
        with _translated():
            return super().invoke(ctx)


@contextmanager
def _translated() -> Iterator[None]:
    with interrupts() as noted:
        try:
            yield
            sys.stdout.flush()
        except typer.Exit:
            raise
        except BaseException as error:
            _end(error, interrupted=noted.seen or isinstance(error, KeyboardInterrupt))
    if noted.seen:
        typer.echo("cnr: interrupted; this is the best found until then", err=True)
        raise typer.Exit(INTERRUPTED)


def _end(error: BaseException, *, interrupted: bool) -> None:
    """Turn what ended a command into one line and an exit code; raise it again where that is a bug."""
    if interrupted:  # whatever was interrupted may have failed with an error of its own
        typer.echo("cnr: interrupted", err=True)
        raise typer.Exit(INTERRUPTED) from None
    if isinstance(error, BrokenPipeError):
        # The reader has seen enough; keep the interpreter from flushing into nowhere on its way out.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return
    from codesign.cli_usage import usage_line
    from codesign.report.output import plain

    line, code = usage_line(error), 2
    if isinstance(error, CodesignError):
        line, code = f"cnr: {error}", error.exit_code
    if line is None:
        raise error
    typer.echo(plain(line), err=True)
    raise typer.Exit(code) from None
