"""The command `shiftfix`: commands are found by name and imported when called, so that --help stays fast."""

from __future__ import annotations

import os
import sys
from collections.abc import MutableMapping
from importlib import import_module

import click

_COMMANDS = {
    "run": "run a pipeline file and write its run folder",
    "check": "check a pipeline file in full without touching data",
    "explain": "show the resolved plan: order, units, values and where each came from",
    "nodes": "list the nodes, or describe one with its ports and parameters",
    "plugins": "list every plugin found with distribution, version and state",
    "verify": "compare a run folder and its inputs with the hashes in its record",
}


class _Commands(click.Group):
    def list_commands(self, context: click.Context) -> list[str]:
        return list(_COMMANDS)

    def get_command(self, context: click.Context, name: str) -> click.Command | None:
        if name not in _COMMANDS:
            return None
        return import_module(f"shiftfix.cli.{name}").command

    def format_commands(self, context: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl(list(_COMMANDS.items()))

    def resolve_command(self, context: click.Context, args: list[str]):
        try:
            return super().resolve_command(context, args)
        except click.UsageError as error:
            import difflib

            close = difflib.get_close_matches(args[0], _COMMANDS, 1)
            if close:
                error.message += f" Did you mean {close[0]!r}?"
            raise


@click.command(
    cls=_Commands,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
    epilog="Exit codes: 0 fix delivered or command done, 1 internal fault, 2 usage, 3 pipeline file invalid, 4 input "
    "unusable, 5 ran without acceptable fix, 6 ran and is ambiguous, 7 a plugin failed, 8 verification mismatch, "
    "130 interrupted.",
)
@click.version_option(package_name="shiftfix")
def cli() -> None:
    """Doppler tracking of radio transmitters from the logs of several stations.

    A pipeline file wires nodes that come from plugins; `shiftfix run FILE` turns the logs into a position, a velocity and a
    rest frequency with an error, or says why that cannot be done.
    """


_THREADS = ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS")


def one_thread(environment: MutableMapping[str, str]) -> None:
    """Ask the linear algebra for one thread, unless its user has said how many; to be called before numpy is imported.

    The matrices here are small: with two threads on two busy cores a run took two to six times as long, and the number of
    threads changes the last digits of sums.
    """
    if not any(name in environment for name in _THREADS):
        environment.update(dict.fromkeys(_THREADS, "1"))


def main() -> None:
    """Run the command line; every outcome leaves by its exit code, a traceback only with --debug."""
    one_thread(os.environ)
    debug = "--debug" in sys.argv
    try:
        code = cli.main(standalone_mode=False)
        sys.exit(code if isinstance(code, int) else 0)
    except click.exceptions.Exit as stop:
        sys.exit(stop.exit_code)
    except click.ClickException as error:
        error.show()
        sys.exit(2)
    except (KeyboardInterrupt, click.exceptions.Abort):
        click.echo("interrupted", err=True)
        sys.exit(130)
    except Exception as error:
        from shiftfix.errors import ShiftfixError

        if debug:
            raise
        if isinstance(error, ShiftfixError):
            click.echo(str(error), err=True)
            sys.exit(error.exit_code)
        if isinstance(error, BrokenPipeError):
            sys.exit(0)
        click.echo(
            f"internal fault: {type(error).__name__}: {error}\n    try: the same command with --debug, and report what it prints",
            err=True,
        )
        sys.exit(1)


if __name__ == "__main__":
    main()
