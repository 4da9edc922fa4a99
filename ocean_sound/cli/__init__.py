"""The command line: one file per command, each imported when it is called for.

Exit status: 0 done; 1 the machine failed; 2 bad usage or bad input, nothing written; 3 done in part; 130 interrupted.
Errors go to standard error in one line each; `--debug` adds the traceback; with `--json` standard output carries an
object with an `error`.
"""

from __future__ import annotations

import difflib
import json
import sys
import traceback
from importlib import import_module
from typing import TYPE_CHECKING

import click

from ..errors import OceanSoundError, OutputError, WorkerError

if TYPE_CHECKING:
    from collections.abc import Sequence

DONE, FAILED, BAD_INPUT, IN_PART, INTERRUPTED = 0, 1, 2, 3, 130

_COMMANDS = ("speed", "cast", "archive", "rays", "soundings", "sensors", "demo")


class _Commands(click.Group):
    """Commands found by name and imported only then."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002
        return list(_COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002
        if cmd_name not in _COMMANDS:
            return None
        command: click.Command = import_module(f".{cmd_name}", __name__).command
        return command

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        if args and args[0] not in _COMMANDS and not args[0].startswith("-"):
            near = difflib.get_close_matches(args[0], _COMMANDS, n=1)
            hint = f"did you mean '{near[0]}'?" if near else f"the commands are {', '.join(_COMMANDS)}"
            ctx.fail(f"there is no command '{args[0]}': {hint}")
        return super().resolve_command(ctx, args)


def _version(ctx: click.Context, _parameter: click.Parameter, wanted: bool) -> None:
    if wanted and not ctx.resilient_parsing:
        from importlib.metadata import version

        click.echo(f"ocean-sound {version('ocean_sound')}")
        ctx.exit()


@click.group(cls=_Commands, context_settings={"help_option_names": ["-h", "--help"]})
@click.option("--version", is_flag=True, expose_value=False, is_eager=True, callback=_version, help="Show the version.")
@click.option("--debug", is_flag=True, expose_value=False, help="Show the traceback of an error.")
def commands() -> None:
    """From casts of temperature, salinity and depth to the speed of sound in water and its paths.

    \b
    Start with:
      ocean-sound demo
      ocean-sound speed --temperature 10 --salinity 35 --depth 100 --latitude 45
      ocean-sound cast my-cast.csv --figure profile.png
      ocean-sound rays my-cast.csv --source-depth 30 --max-range 10000 --figure rays.png

    An aid, not a navigational product: the hydrographer in charge and the responsible authority's own specification
    decide whether a survey meets its order. Sound sources can injure divers and marine life: follow local regulations
    and licensed practice.
    """


def run(arguments: Sequence[str]) -> int:
    """Run one command line and return its exit status; whatever goes wrong ends as one line on standard error."""
    try:
        status = commands.main(args=list(arguments), prog_name="ocean-sound", standalone_mode=False)
    except click.exceptions.Exit as done:
        return done.exit_code
    except (click.Abort, KeyboardInterrupt):
        return _fail("interrupted", INTERRUPTED, arguments)
    except click.UsageError as error:
        command = error.ctx.command_path if error.ctx else "ocean-sound"
        return _fail(f"{error.format_message()} (see '{command} --help')", BAD_INPUT, arguments)
    except OceanSoundError as error:
        # An output that can't be written for a cause of its own, a full disk say, is the machine's fault.
        machine = isinstance(error, WorkerError) or (isinstance(error, OutputError) and error.__cause__ is not None)
        return _fail(str(error), FAILED if machine else BAD_INPUT, arguments)
    except SystemExit:
        # click's answer when whoever read our output has gone: nothing is left to say, nor anywhere to say it.
        return DONE
    except OSError as error:
        where = f"{error.filename}: " if error.filename else ""
        return _fail(f"{where}{error.strerror or error}", FAILED, arguments)
    except MemoryError:
        return _fail("out of memory: give fewer rays, points or casts at once", FAILED, arguments)
    except Exception as error:  # noqa: BLE001 - the last door: a fault of ours must not show a traceback either
        return _fail(
            f"a fault of ocean-sound itself: {type(error).__name__}: {error} (--debug shows where)", FAILED, arguments
        )
    return status if isinstance(status, int) else DONE


def _fail(message: str, status: int, arguments: Sequence[str]) -> int:
    if "--debug" in arguments:
        traceback.print_exc()
    click.echo(f"ocean-sound: {message}", err=True)
    if "--json" in arguments:
        click.echo(json.dumps({"error": message, "exit_status": status}, ensure_ascii=False))
    return status


def main() -> None:
    """Entry point of the `ocean-sound` command."""
    sys.exit(run(sys.argv[1:]))
