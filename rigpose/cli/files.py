"""`rigpose flat`, `rigpose start` and `rigpose schema`: rig files in and out."""

from __future__ import annotations

from pathlib import Path

import click

from rigpose.cli.given import as_json, keep_inputs, the_rig
from rigpose.cli.show import print_json
from rigpose.files.disk import write_whole
from rigpose.files.flat import flat_text
from rigpose.files.schema import rig_schema, schema_text, shot_schema
from rigpose.files.start import start_text
from rigpose.ground.errors import BadInput, Problem
from rigpose.model.rig import METRES

out_option = click.option("--out", metavar="FILE", default=None,
                          help="Write it there; else to the terminal.")


@click.command("flat", short_help="Print a rig with copies, sizes and short forms expanded.")
@click.argument("rig")
@out_option
@as_json
def flat_command(rig: str, out: str | None, as_json: bool) -> int:
    """Print a rig with copies, sizes and short forms expanded: what the solver sees."""
    loaded = the_rig(rig)
    keep_inputs({"the rig": rig}, {"--out": out})
    return _give(flat_text(loaded), out, as_json,
                 {"name": loaded.name, "joints": len(loaded.joints),
                  "fingerprint": loaded.fingerprint})


@click.command("start", short_help="Begin a rig file from a CSV of joint places.")
@click.argument("joints")
@out_option
@click.option("--unit", type=click.Choice(list(METRES)), default="m", show_default=True,
              help="The unit of the CSV file, and so of the rig.")
@click.option("--up", type=click.Choice(["y", "z"]), default="y", show_default=True,
              help="The axis that points up in the CSV file.")
@as_json
def start_command(joints: str, out: str | None, unit: str, up: str, as_json: bool) -> int:
    """Begin a rig file from a CSV of joint places; the sections are there to fill in."""
    text = start_text(joints, unit, up)
    if out is not None and Path(out).exists():
        # A rig that somebody has filled in is hours of work; a second `start` would empty it.
        raise BadInput(Problem("--out", out, "a new rig file replaces nothing",
                               "a file that exists", "name another file, or remove this one"))
    return _give(text, out, as_json, {})


@click.command("schema", short_help="Print the JSON Schema of rig or shot files, for editors.")
@click.option("--shot", is_flag=True, help="That of shot files.")
@out_option
def schema_command(out: str | None, shot: bool) -> int:
    """Print the JSON Schema of rig files, or of shot files, for editors that complete and check."""
    return _give(schema_text(shot_schema() if shot else rig_schema()), out, False, {})


def _give(text: str, out: str | None, as_json: bool, facts: dict[str, object]) -> int:
    if out is not None:
        write_whole(out, text.encode())
    if as_json:
        print_json({**facts, "out": out, **({} if out is not None else {"text": text})})
    elif out is None:
        click.echo(text, nl=False)
    else:
        click.echo(f"wrote {out}")
    return 0
