"""`rigpose check RIG`: what this rig can do before anyone animates it."""

from __future__ import annotations

from pathlib import Path

import click

from rigpose.cli.given import as_json, the_rig
from rigpose.cli.show import print_json
from rigpose.files.disk import write_whole
from rigpose.files.settle import settle_text
from rigpose.solve.report import check
from rigpose.solve.rest import find_rest


@click.command("check", short_help="Say what a rig can do before anyone animates it.")
@click.argument("rig")
@click.option("--settle", metavar="OUT", default=None,
              help="Write the rig there with its rest pose as places, comments kept.")
@as_json
def check_command(rig: str, settle: str | None, as_json: bool) -> int:
    """Report on a rig: rest pose, freedoms, redundant lengths, what would pose it."""
    loaded = the_rig(rig)
    report = check(loaded)
    if settle is not None:
        write_whole(settle, settle_text(Path(rig), loaded, find_rest(loaded)).encode())
    if as_json:
        print_json({**report.as_dict(), "out": settle})
    else:
        click.echo(str(report))
        if settle is not None:
            click.echo(f"wrote {settle}")
    return 1 if report.problems else 0
