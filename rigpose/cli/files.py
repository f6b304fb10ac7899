"""`rigpose flat`, `rigpose start` and `rigpose schema`: rig files in and out."""

from __future__ import annotations

import click

from rigpose.cli.given import as_json
from rigpose.cli.show import print_json
from rigpose.files.disk import Beside
from rigpose.files.flat import flat_text
from rigpose.files.rigfile import load_rig
from rigpose.files.schema import json_schema
from rigpose.files.start import start_text
from rigpose.model.rig import METRES


@click.command("flat")
@click.argument("rig")
@click.option("--out", metavar="FILE", default=None, help="Write it there (terminal).")
@as_json
def flat_command(rig: str, out: str | None, as_json: bool) -> int:
    """Print a rig with copies, sizes and short forms expanded: what the solver sees."""
    loaded = load_rig(rig)
    return _give(flat_text(loaded), out, as_json,
                 {"name": loaded.name, "joints": len(loaded.joints),
                  "fingerprint": loaded.fingerprint})


@click.command("start")
@click.argument("joints")
@click.option("--out", metavar="RIG", default=None, help="Write the rig file there (terminal).")
@click.option("--unit", type=click.Choice(list(METRES)), default="m", show_default=True)
@click.option("--up", type=click.Choice(["y", "z"]), default="y", show_default=True)
@as_json
def start_command(joints: str, out: str | None, unit: str, up: str, as_json: bool) -> int:
    """Begin a rig file from a CSV of joint places; the sections are there to fill in."""
    return _give(start_text(joints, unit, up), out, as_json, {})


@click.command("schema")
@click.option("--out", metavar="FILE", default=None, help="Write it there (terminal).")
def schema_command(out: str | None) -> int:
    """Print the JSON Schema of rig files, for editors that complete and check."""
    import msgspec

    text = msgspec.json.format(msgspec.json.encode(json_schema()), indent=2).decode()
    return _give(text + "\n", out, False, {})


def _give(text: str, out: str | None, as_json: bool, facts: dict[str, object]) -> int:
    if out is not None:
        with Beside(out) as file:
            file.write(text.encode())
    if as_json:
        print_json({**facts, "out": out, **({} if out is not None else {"text": text})})
    elif out is None:
        click.echo(text, nl=False)
    else:
        click.echo(f"wrote {out}")
    return 0
