"""The command `rigpose`: its verbs, and what its exit codes mean.

0 all is well; 1 a result that falls short (a target out of reach, a frame without a pose, a set
cut short); 2 wrong input; 3 a fault of the program; 130 interrupted.
"""

from __future__ import annotations

import os
import sys
import traceback
from types import TracebackType

import click

from rigpose.cli.bake import bake_command
from rigpose.cli.check import check_command
from rigpose.cli.files import flat_command, schema_command, start_command
from rigpose.cli.pose import pose_command
from rigpose.ground.errors import RigposeError

WRONG_INPUT, FAULT, INTERRUPTED = 2, 3, 130


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="rigpose")
def rigpose() -> None:
    """Pose mechanical linkages for keyframed shots: every assembly, every length kept.

    Poses are geometry, not strength, clearance or safety: whatever is built from them follows
    local codes and a licensed engineer.
    """


for _verb in (check_command, pose_command, bake_command, flat_command, start_command,
              schema_command):
    rigpose.add_command(_verb)


def main(arguments: list[str] | None = None) -> None:
    """Run the command and leave with its exit code."""
    sys.excepthook = _fault
    sys.exit(run(arguments))


def _fault(kind: type[BaseException], error: BaseException, trace: TracebackType | None) -> None:
    """A fault of the program: the ordinary traceback, and an exit code of its own."""
    traceback.print_exception(kind, error, trace)
    sys.stdout.flush()
    os._exit(FAULT)


def run(arguments: list[str] | None = None) -> int:
    """Run the command; its exit code. A fault of the program is raised as it is."""
    try:
        code = rigpose.main(args=arguments, prog_name="rigpose", standalone_mode=False)
    except click.ClickException as wrong:
        wrong.show()
        return WRONG_INPUT
    except (KeyboardInterrupt, click.Abort):
        click.echo("interrupted; nothing half written is left", err=True)
        return INTERRUPTED
    except RigposeError as wrong:
        click.echo(str(wrong), err=True)
        return WRONG_INPUT
    except BrokenPipeError:
        # Whoever read our output has had enough (`rigpose pose … | head`).
        sys.stderr.close()
        return 0
    return code if isinstance(code, int) else 0
