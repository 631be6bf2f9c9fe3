"""The command line: a thin group that loads each command only when it is asked for.

Each command lives in `lespost/cli/<name>.py` as an object called `command`. Here is what they share: errors become
one short paragraph on stderr and an exit code (0 done, 2 request wrong, 3 data wrong, 4 finished in part, 130
interrupted), and a traceback is shown only with --debug.
"""

from __future__ import annotations

import importlib
import sys
from collections.abc import Sequence
from typing import Any

import click

from lespost.errors import LespostError
from lespost.versions import stack_versions

#: Commands in the order a newcomer meets them.
COMMANDS = ("inspect", "run", "scales", "waves", "record", "laws", "page")

class CommandGroup(click.Group):
    """A click group whose commands are imported on first use, so that `lespost --help` stays quick."""

    def list_commands(self, context: click.Context) -> list[str]:
        """All command names, in the order of `COMMANDS`."""
        return list(COMMANDS)

    def get_command(self, context: click.Context, name: str) -> click.Command | None:
        """The command called `name`, or None if there is none."""
        if name not in COMMANDS:
            return None
        command: click.Command = importlib.import_module(f"lespost.cli.{name}").command
        return command


def _print_versions(context: click.Context, _option: click.Parameter, asked: bool) -> None:
    if not asked or context.resilient_parsing:
        return
    versions = stack_versions()
    click.echo(f"lespost {versions.pop('lespost')}")
    click.echo("  ".join(f"{name} {number}" for name, number in versions.items()))
    context.exit()


@click.group(cls=CommandGroup, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 110})
@click.option("--debug", is_flag=True, help="Show the full traceback of an error.")
@click.option("--version", is_flag=True, is_eager=True, expose_value=False, callback=_print_versions,
              help="Print the versions of lespost and of the libraries it stands on.")
@click.pass_context
def group(context: click.Context, debug: bool) -> None:
    """Large-eddy simulations of the ocean surface boundary layer: turbulence regimes, profiles, and what a moored
    instrument would have recorded in them.

    Start with `lespost inspect PATH`: it says what the files hold and proposes a recipe; `lespost run RECIPE` does
    the rest.
    """
    context.obj = {"debug": debug}


def _paragraph(error: BaseException) -> str:
    return " ".join(str(error).split()) if "\n" not in str(error) else str(error).rstrip()


def run(arguments: Sequence[str] | None = None) -> int:
    """Run the command line on `arguments` (default: the process's own) and return the exit code."""
    words = list(sys.argv[1:] if arguments is None else arguments)
    debug = "--debug" in words
    try:
        result: Any = group.main(args=words, prog_name="lespost", standalone_mode=False)
    except LespostError as error:
        if debug:
            raise
        click.echo(f"lespost: {_paragraph(error)}", err=True)
        return error.exit_code
    except click.exceptions.Abort:
        click.echo("lespost: interrupted; run the same command again to go on from here.", err=True)
        return 130
    except click.ClickException as error:
        error.show()
        return 2
    except KeyboardInterrupt:
        click.echo("lespost: interrupted; run the same command again to go on from here.", err=True)
        return 130
    except BrokenPipeError:
        # The reader of our output (head, less) went away: not our error, but Python would complain at exit.
        sys.stderr.close()
        return 0
    except OSError as error:
        if debug:
            raise
        place = f" ({error.filename})" if error.filename else ""
        click.echo(f"lespost: {error.strerror or error}{place}: check the path, its permissions and the free space.",
                   err=True)
        return 3
    except MemoryError:
        if debug:
            raise
        click.echo("lespost: not enough memory; lower [compute].memory or [compute].threads in the recipe.", err=True)
        return 3
    return result if isinstance(result, int) else 0


def main() -> None:
    """Entry point of the installed `lespost` command."""
    sys.exit(run())
