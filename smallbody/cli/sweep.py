"""`smallbody sweep`: one body over a grid of inputs."""

from __future__ import annotations

from math import prod
from pathlib import Path

import click

from smallbody.cli.inputs import grid, writable
from smallbody.cli.talk import common, talk_of


@click.command(name="sweep")
@click.argument("run", type=click.Path(path_type=Path), metavar="RUN.toml")
@click.option(
    "--over", "specifications", multiple=True, required=True, metavar="KEY=VALUES",
    help="Values of a key, as start:stop:step or v1,v2,...; repeated, they make a grid.",
)  # fmt: skip
@click.option("--out", type=click.Path(path_type=Path), metavar="S.h5", required=True, help="The HDF5 file to write.")
@click.option(
    "--set", "changes", multiple=True, metavar="KEY=VALUE", help="Change a key for all cells; can be repeated."
)
@common
@click.pass_context
def command(
    ctx: click.Context, run: Path, specifications: tuple[str, ...], out: Path, changes: tuple[str, ...]
) -> None:
    """The same rates over a grid of inputs, kept and resumed cell by cell.

    Stopped by Ctrl-C or a power cut, the same command goes on where it was: finished cells are in S.h5.parts/ until
    all are done.

    \b
      smallbody sweep runs/pebble.toml --over spin.obliquity_deg=0:180:15 --out s.h5
    """
    from smallbody.body import read_body

    talk = talk_of(ctx)
    over = grid("--over", specifications)
    body = read_body(run, changes)
    for key, values in over.items():
        for value in values:
            body.changed({key: value})  # a value that is not allowed is better known now than at the last cell
    writable("--out", out)

    from smallbody.batch import sweep

    talk.say(f"{prod(map(len, over.values()))} cells", 1)
    sweep(body, over, out=out, meter=talk.meter())
    click.echo(out)
