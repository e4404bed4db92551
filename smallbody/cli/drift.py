"""`smallbody drift`: one body, from its description to its rates."""

from __future__ import annotations

import json
import time
from pathlib import Path

import click

from smallbody.cli.inputs import writable
from smallbody.cli.messages import common, messages_of


@click.command(name="drift")
@click.argument("run", type=click.Path(path_type=Path), metavar="RUN.toml")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON object and nothing else.")
@click.option("--out", type=click.Path(path_type=Path), metavar="R.h5", help="Keep everything in this HDF5 file.")
@click.option(
    "--set", "changes", multiple=True, metavar="KEY=VALUE",
    help="Change a key of the description, such as surface.thermal_inertia=200; can be repeated.",
)  # fmt: skip
@common
@click.pass_context
def command(ctx: click.Context, run: Path, as_json: bool, out: Path | None, changes: tuple[str, ...]) -> None:
    """Mean rates at which sunlight changes orbit and spin of one body.

    RUN.toml describes the body. Each rate comes with its numerical error, from repeats with coarser steps, and split
    by cause: heat radiated, sunlight scattered, sunlight as it strikes.
    """
    from smallbody.body import read_body

    messages = messages_of(ctx)
    body = read_body(run, changes)
    if out is not None:
        writable("--out", out)

    from smallbody.push import drift

    began = time.perf_counter()
    result = drift(body, meter=messages.meter())
    messages.say(f"computed in {time.perf_counter() - began:.1f} s", 1)
    if as_json:
        click.echo(json.dumps(result.to_dict(), allow_nan=False, indent=1))
    else:
        from smallbody.cli.report import print_drift

        print_drift(body, result, [note for note in result.notes if not messages.has_said(note)])
    if out is not None:  # after the printing: a disk that is full by now does not cost the numbers
        from smallbody.store import save

        save(result, out)
        messages.say(f"written: {out}")
