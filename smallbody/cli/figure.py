"""`smallbody figure`: pictures of what a result file holds."""

from __future__ import annotations

from pathlib import Path

import click

from smallbody.cli.inputs import named_numbers, writable
from smallbody.cli.messages import common, messages_of


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

    FILE was written by drift or sweep, or is the .parts folder of a sweep under way. KIND is temperature, light,
    rotation or season for the one, rates for the other; left away, the first that fits. Choices, with --set:

    \b
      temperature, light  views=front,back,morning,evening,north,south
                          phase_deg=0,90  colours=NAME  low=K  high=K
      rotation            facets=12,80  against=hour_angle|phase
      rates               rates=NAME,NAME  x=KEY  as_map=true  sphere=false
                          KEY=VALUE to hold an input at one of its values
    """
    choices = {name.replace(".", "_"): value for name, value in named_numbers("--set", settings).items()}
    for name in ("result", "kind", "out"):
        if name in choices:
            raise click.BadParameter(f"{name} is not a choice of a picture", param_hint="--set")
    writable("--out", out)

    from smallbody.figures import draw

    draw(file, kind, out, **choices)
    messages_of(ctx).say(f"written: {out}", 1)
    click.echo(out)
