"""`smallbody shape`: look over a shape, mend it, or make one."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from smallbody.cli.inputs import named_numbers, writable
from smallbody.cli.messages import common, messages_of

if TYPE_CHECKING:
    from smallbody.shape import Shape

LENGTH_UNIT = click.option(
    "--length-unit",
    type=click.Choice(["km", "m"]),
    default="km",
    show_default=True,
    help="Unit of length in the files.",
)


class LookOrMake(click.Group):
    """A group whose default command is `look`: `shape FILE` looks over a file, `shape make KIND` makes one."""

    def parse_args(self, ctx: click.Context, args: list[str]) -> list[str]:
        flags = [arg for arg in args if arg in ("-v", "-q", "--verbose", "--quiet")]
        words = [arg for arg in args if arg not in flags]
        if words[:1] == ["make"]:
            args = ["make", *words[1:], *flags]
        elif words[:1] not in (["-h"], ["--help"], []):
            args = ["look", *args]
        elif not words:
            raise click.UsageError("give a shape file to look over, or make KIND to make one", ctx)
        return super().parse_args(ctx, args)

    def format_usage(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        formatter.write_usage(ctx.command_path, "[OPTIONS] FILE")
        formatter.write_usage(ctx.command_path, "make KIND --facets N --out F", prefix=" " * len("Usage: "))

    def format_options(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        self.commands["look"].format_options(ctx, formatter)


@click.command(cls=LookOrMake, name="shape", subcommand_metavar="")
def command() -> None:
    """Look over a shape, mend it, or make one.

    FILE is an OBJ, STL or PLY file, or a plain table of vertices and facets. It is checked (closed, facets outward,
    none missing or twice) and measured. With --mend, what needs no guess is mended first. With --out it is written
    again, in the format of that name.

    A file called make is reached as ./make; `make --help` tells of the kinds that can be made.
    """


@command.command(name="look", hidden=True)
@click.argument("file", type=click.Path(path_type=Path), metavar="FILE")
@click.option("--mend", is_flag=True, help="Merge vertices, drop facets without area, turn facets outward.")
@click.option("--out", type=click.Path(path_type=Path), metavar="F", help="Write the shape here: obj, stl, ply or tab.")
@LENGTH_UNIT
@common
@click.pass_context
def look(ctx: click.Context, file: Path, mend: bool, out: Path | None, length_unit: str) -> None:
    """Look over a shape file."""
    if out is not None:
        writable("--out", out)
    from smallbody.errors import ShapeError
    from smallbody.shape import check_shape, mend_shape, read_shape

    shape = read_shape(file, length_unit)
    if mend:
        shape, done = mend_shape(shape)
        for what in done or ["nothing to mend"]:
            click.echo(f"mended: {what}" if done else what)
    faults = check_shape(shape)
    serious = [fault.message for fault in faults if fault.serious]
    if serious:
        raise ShapeError(f"{file}: {'; '.join(serious)}", lines=[f"{file}: {message}" for message in serious])
    for fault in faults:
        messages_of(ctx).note(f"{file}: {fault.message}")
    _print_look(ctx, str(file), shape)
    if out is not None:
        _write(ctx, shape, out, length_unit)


class WithKinds(click.Command):
    """A command whose help tells of the kinds of bodies and their numbers, which only the shape room knows."""

    def format_epilog(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        from smallbody.shape import KINDS

        for name, kind in KINDS.items():
            with formatter.section(f"{name}, {kind.about}"):
                rows = [
                    (f"{number}={shown.default:g}", f"{shown.about} ({shown.low:g} to {shown.high:g})")
                    for number, shown in kind.numbers.items()
                ]
                formatter.write_dl(rows or [("", "no numbers of its own")])


@command.command(name="make", cls=WithKinds)
@click.argument("kind", metavar="KIND")
@click.option("--facets", type=int, required=True, metavar="N", help="How many facets, about.")
@click.option("--out", type=click.Path(path_type=Path), required=True, metavar="F", help="File: obj, stl, ply or tab.")
@click.option("--seed", type=int, default=0, show_default=True, metavar="S", help="Another seed, another body.")
@click.option(
    "--set", "settings", multiple=True, metavar="NAME=VALUE",
    help="A number of the kind, or diameter_km (1, that of the sphere of the same volume).",
)  # fmt: skip
@LENGTH_UNIT
@common
@click.pass_context
def make(
    ctx: click.Context, kind: str, facets: int, out: Path, seed: int, settings: tuple[str, ...], length_unit: str
) -> None:
    """Make a shape of some kind, the same for the same seed, and write it to a file."""
    numbers = named_numbers("--set", settings)
    writable("--out", out)
    from smallbody.shape import make_shape

    for taken in ("kind", "facets", "seed", "nearest"):
        if taken in numbers:
            raise click.BadParameter(f"{taken} is not a number of a kind; see --{taken}", param_hint="--set")
    shape = make_shape(kind, facets, seed, **numbers)
    _write(ctx, shape, out, length_unit)
    _print_look(ctx, str(out), shape)


def _write(ctx: click.Context, shape: Shape, out: Path, length_unit: str) -> None:
    from smallbody.shape import write_shape

    write_shape(shape, out, length_unit)
    messages_of(ctx).say(f"written: {out}")


def _print_look(ctx: click.Context, name: str, shape: Shape) -> None:
    """What a shape is, and how much of it lies in its own shadow at times."""
    from smallbody.cli.report import print_shape
    from smallbody.light import horizons_of
    from smallbody.shape import describe

    messages = messages_of(ctx)
    sky = horizons_of(shape, columns=64, lit_samples=1, meter=messages.meter())
    print_shape(name, describe(shape), sky.overshadowed_fraction, details=messages.loudness > 0)
