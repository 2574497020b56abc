"""What every command has: the program that it is one of, its exit statuses, and how its faults end."""

from __future__ import annotations

import functools
import re
from collections.abc import Callable
from typing import Any, ParamSpec

import typer
from typer.core import TyperCommand

from biasband.errors import BiasbandError

PASSED, NOT_PASSED, BAD_INPUT, INTERRUPTED = 0, 1, 2, 130

app = typer.Typer(
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    no_args_is_help=True,
    help="From a hand-computed bias network to buyable parts and a signed-off margin table.",
)

Arguments = ParamSpec("Arguments")


class _Command(TyperCommand):
    """A command to which "-1" is an argument below zero, so that it is told why it will not do."""

    def parse_args(self, ctx: Any, args: list[str]) -> list[str]:
        ctx.ignore_unknown_options = any(re.match(r"-\.?[0-9]", each) for each in args)
        return super().parse_args(ctx, args)


def command(work: Callable[Arguments, int]) -> Callable[Arguments, int]:
    """Make a command of a function that returns an exit status; faults of the input are its status 2."""

    @functools.wraps(work)
    def guarded(*args: Arguments.args, **kwargs: Arguments.kwargs) -> None:
        raise typer.Exit(_status(lambda: work(*args, **kwargs)))

    app.command(cls=_Command)(guarded)
    return work


def _status(work: Callable[[], int]) -> int:
    try:
        return work()
    except BiasbandError as error:
        complain(str(error))
        return BAD_INPUT
    except KeyboardInterrupt:
        return INTERRUPTED
    except RuntimeError as error:
        # Where a class is being made, Python 3.11 makes a RuntimeError of an interruption.
        if isinstance(error.__cause__, KeyboardInterrupt):
            return INTERRUPTED
        raise


def complain(text: str) -> None:
    """Write a message for people on standard error."""
    from biasband.show import output

    output.complain(text)
