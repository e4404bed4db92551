"""The command line: a command parses, calls, prints. Results on stdout, messages on stderr.

One module per command, imported when the command is run; what a command needs is imported when it works.
"""

from __future__ import annotations

import importlib
import sys
from collections.abc import Sequence
from typing import Any

import click

from smallbody import __version__
from smallbody.cli.messages import Interrupted, common, error_lines, listening, messages_of
from smallbody.errors import SmallbodyError

# name: one line for the list of commands (each equals the first line of the command's own help, which a test asks)
COMMANDS = {
    "shape": "Look over a shape, mend it, or make one.",
    "drift": "Mean rates at which sunlight changes orbit and spin of one body.",
    "sweep": "The same rates over a grid of inputs, kept and resumed cell by cell.",
    "figure": "Draw what a result file holds.",
}


class OneLine(click.Group):
    """A group that imports a command when it is called for, and ends every failure with one line and its exit code."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, name: str) -> click.Command | None:
        if name not in COMMANDS:
            return None
        command: click.Command = importlib.import_module(f"smallbody.cli.{name}").command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        if args[0] not in COMMANDS and not args[0].startswith("-"):
            import difflib

            near = difflib.get_close_matches(args[0], COMMANDS, n=1)
            hint = f"did you mean {near[0]}?" if near else f"there are {', '.join(COMMANDS)}"
            raise click.UsageError(f"no command {args[0]!r}: {hint}")
        return super().resolve_command(ctx, args)

    def invoke(self, ctx: click.Context) -> Any:
        with listening(messages_of(ctx)):
            try:
                return super().invoke(ctx)
            except KeyboardInterrupt:
                click.echo("smallbody: interrupted", err=True)
                raise click.exceptions.Exit(Interrupted.exit_code) from None
            except SmallbodyError as error:
                for line in error_lines(error):
                    click.echo(f"smallbody: {line}", err=True)
                raise click.exceptions.Exit(error.exit_code) from None
            except MemoryError:
                click.echo("smallbody: not enough memory for this many facets, nodes and places", err=True)
                raise click.exceptions.Exit(2) from None
            except (click.ClickException, click.exceptions.Exit, click.Abort, BrokenPipeError):
                raise  # click's own: a pipe that its reader closed ends quietly
            except OSError as error:  # a full disk behind stdout, say
                what = f"{error.filename}: " if error.filename else ""
                click.echo(f"smallbody: {what}{error.strerror or error}", err=True)
                raise click.exceptions.Exit(2) from None
            except Exception as error:
                if messages_of(ctx).loudness > 0:
                    import traceback

                    click.echo(traceback.format_exc(), err=True)
                reason = f"{type(error).__name__}: {' '.join(str(error).split())}"
                click.echo(f"smallbody: {reason} (a fault of the program, not yours; -v shows where)", err=True)
                raise click.exceptions.Exit(1) from None

    def main(
        self,
        args: Sequence[str] | None = None,
        prog_name: str | None = None,
        complete_var: str | None = None,
        standalone_mode: bool = True,
        **extra: Any,
    ) -> Any:
        """Run the command line; ends with SystemExit as click's own does, but a wrong call is told in one line."""
        try:
            code = super().main(args, prog_name, complete_var, standalone_mode=False, **extra)
        except click.ClickException as error:
            code = 2
            if type(error).__name__ == "NoArgsIsHelpError":  # a name that click 8.1 does not have
                click.echo(error.format_message())
                sys.exit(code)
            command = error.ctx.command_path if isinstance(error, click.UsageError) and error.ctx else ""
            hint = f" ({command} --help tells more)" if command else ""
            click.echo(f"smallbody: {' '.join(error.format_message().split())}{hint}", err=True)
        except click.Abort:
            click.echo("smallbody: interrupted", err=True)
            code = Interrupted.exit_code
        code = code if isinstance(code, int) else 0
        if standalone_mode:
            sys.exit(code)
        return code


@click.command(cls=OneLine, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, message="smallbody %(version)s")
@common
def cli() -> None:
    """How sunlight moves small bodies: drift of the orbit and change of the spin, with numerical errors.

    A body is described in a TOML file; its shape comes from a facet file, or is made here.

    \b
      smallbody shape shapes/thimble.obj
      smallbody drift runs/thimble.toml --out thimble.h5
      smallbody figure thimble.h5 --out thimble.png
    """


def main() -> None:
    """Entry point of the `smallbody` command."""
    cli.main(prog_name="smallbody")
