"""`rigpose check RIG`: what this rig can do before anyone animates it."""

from __future__ import annotations

from pathlib import Path

import click

from rigpose.cli.given import as_json
from rigpose.cli.show import print_json
from rigpose.files.disk import Beside
from rigpose.files.rigfile import load_rig
from rigpose.files.settle import settle_text
from rigpose.solve.report import check
from rigpose.solve.rest import find_rest


@click.command("check")
@click.argument("rig")
@click.option("--settle", metavar="OUT", default=None,
              help="Write the rig with its rest pose as places, comments kept.")
@as_json
def check_command(rig: str, settle: str | None, as_json: bool) -> int:
    """Report on a rig: rest pose, freedoms, redundant lengths, what would pose it."""
    loaded = load_rig(rig)
    report = check(loaded)
    if settle is not None:
        text = settle_text(Path(rig), loaded, find_rest(loaded))
        with Beside(settle) as out:
            out.write(text.encode())
    if as_json:
        print_json(report.as_dict())
    else:
        click.echo(str(report))
    return 1 if report.problems else 0
