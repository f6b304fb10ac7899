"""The command `rigpose`: its verbs, and what its exit codes mean.

0 all is well; 1 a result that falls short (a target out of reach, a frame without a pose, a set
cut short); 2 wrong input; 3 a fault of the program; 130 interrupted.
"""

from __future__ import annotations

import io
import os
import sys
import traceback
from importlib.metadata import PackageNotFoundError, version
from types import TracebackType

import click

from rigpose.cli.bake import bake_command
from rigpose.cli.check import check_command
from rigpose.cli.files import flat_command, schema_command, start_command
from rigpose.cli.pose import pose_command
from rigpose.cli.show import print_json, problem_dict
from rigpose.ground.errors import BadInput, Problem, RigposeError
from rigpose.model.names import meant

WRONG_INPUT, FAULT, INTERRUPTED = 2, 3, 130


class Verbs(click.Group):
    """A group that says which command may have been meant."""

    def resolve_command(
            self, ctx: click.Context,
            args: list[str]) -> tuple[str | None, click.Command | None, list[str]]:
        """The command that is asked for. Raises UsageError where there is none of that name."""
        if args and self.get_command(ctx, args[0]) is None:
            raise click.UsageError(
                f'there is no command "{args[0]}"; {meant(args[0], list(self.commands))}', ctx)
        return super().resolve_command(ctx, args)


def _version() -> str:
    try:
        return version("rigpose")
    except PackageNotFoundError:
        return "(a checkout that isn't installed)"


@click.group(cls=Verbs, context_settings={"help_option_names": ["-h", "--help"]},
             epilog="rigpose COMMAND --help tells more of each.")
@click.version_option(_version(), message="rigpose %(version)s")
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
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            # A terminal that can't show a sign (a joint may be named in any script) shows its code.
            stream.reconfigure(errors="backslashreplace")
    sys.exit(run(arguments))


def _fault(kind: type[BaseException], error: BaseException, trace: TracebackType | None) -> None:
    """A fault of the program: the ordinary traceback, and an exit code of its own."""
    traceback.print_exception(kind, error, trace)
    sys.stdout.flush()
    sys.stderr.flush()
    os._exit(FAULT)


def run(arguments: list[str] | None = None) -> int:
    """Run the command; its exit code. A fault of the program is raised as it is."""
    given = sys.argv[1:] if arguments is None else arguments
    try:
        code = rigpose.main(args=given, prog_name="rigpose", standalone_mode=False)
        sys.stdout.flush()
    except click.ClickException as wrong:
        _refuse(_usage(wrong), given)
        return WRONG_INPUT
    except (KeyboardInterrupt, click.Abort):
        click.echo("interrupted; nothing half written is left", err=True)
        return INTERRUPTED
    except RigposeError as wrong:
        _refuse(wrong, given)
        return WRONG_INPUT
    except BrokenPipeError:
        # Whoever read our output has had enough (`rigpose pose … | head`). What Python still
        # wants to write when it ends goes nowhere.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    return code if isinstance(code, int) else 0


def _usage(wrong: click.ClickException) -> RigposeError | click.ClickException:
    """A mistake in the command line as one line that says what to look up."""
    context = getattr(wrong, "ctx", None)
    if context is None or isinstance(wrong, getattr(click.exceptions, "NoArgsIsHelpError", ())):
        return wrong
    message = wrong.format_message()
    mend = "" if message.endswith("?") else f"see {context.command_path} --help"
    return BadInput(Problem(context.command_path, "", message.rstrip("."), "", mend))


def _refuse(wrong: RigposeError | click.ClickException, given: list[str]) -> None:
    """Say what is wrong: to a person on standard error, with --json as JSON as well."""
    if isinstance(wrong, click.ClickException):
        wrong.show()
        return
    click.echo(str(wrong), err=True)
    if "--json" in given:
        problems = wrong.problems if isinstance(wrong, BadInput) else ()
        print_json({"problems": [problem_dict(problem) for problem in problems]})
