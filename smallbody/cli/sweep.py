"""`smallbody sweep`: one body over a grid of inputs."""

from __future__ import annotations

from math import prod
from pathlib import Path

import click

from smallbody.cli.inputs import grid, writable
from smallbody.cli.messages import Interrupted, common, messages_of
from smallbody.errors import SmallbodyError


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
    from numpy import nanmax, nanmin

    from smallbody.body import read_body

    messages = messages_of(ctx)
    over = grid("--over", specifications)
    body = read_body(run, changes)
    first = {key: values[0] for key, values in over.items()}
    for key, values in over.items():
        for value in values:
            body.changed({**first, key: value})  # better known now than at the last cell
    writable("--out", out)

    from smallbody.batch import sweep

    cells = prod(map(len, over.values()))
    messages.say(f"{cells} cells", 1)
    try:
        result = sweep(body, over, out=out, meter=messages.meter())
    except KeyboardInterrupt:
        raise Interrupted("interrupted; the same command goes on where it stopped") from None
    if len(result.failed) == cells:
        raise SmallbodyError(f"all {cells} cells failed: {result.failed[0][1]}")
    rates = result.arrays["da_dt_au_per_myr"].values
    messages.say(f"{cells} cells, da/dt from {nanmin(rates):+.3g} to {nanmax(rates):+.3g} au/Myr")
    click.echo(out)
