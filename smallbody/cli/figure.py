"""`smallbody figure`: pictures of what a result file holds."""

from __future__ import annotations

from pathlib import Path

import click

from smallbody.cli.inputs import named_numbers, writable
from smallbody.cli.talk import common, talk_of


@click.command(name="figure")
@click.argument("file", type=click.Path(path_type=Path), metavar="FILE")
@click.argument("kind", required=False, metavar="[KIND]")
@click.option(
    "--out", type=click.Path(path_type=Path), metavar="F.png", required=True, help="Picture: png, pdf or svg."
)
@click.option("--set", "settings", multiple=True, metavar="NAME=VALUE", help="A choice of that kind of picture.")
@common
@click.pass_context
def command(ctx: click.Context, file: Path, kind: str | None, out: Path, settings: tuple[str, ...]) -> None:
    """Draw what a result file holds.

    FILE was written by drift or sweep. KIND is temperature, light, rotation or season for the one, rates for the
    other; left away, the first that fits.
    """
    choices = named_numbers("--set", settings)
    writable("--out", out)

    from smallbody.figures import draw

    draw(file, kind, out, **choices)
    talk_of(ctx).say(f"written: {out}", 1)
    click.echo(out)
