"""The command ``stillbench``: finds the command, turns errors into one line and an exit code."""

import importlib
import os
import sys
from collections.abc import Sequence

import click

from stillbench.version import __version__

COMMANDS = {
    "characterize": "Noise terms, verdicts and a report from one log taken at rest.",
    "check": "Say how a log is understood, before anything is computed from it.",
    "scale": "Scale factor and null from known turns, rates or positions.",
    "selfcheck": "Compute published cases on this machine and compare digit by digit.",
    "demo": "Make two night logs of an invented survey launch and qualify both sensors.",
}
USAGE = 2
NO_MEMORY = "stillbench: not enough memory for this log; cut it with --from and --to, or raise the limit on memory"
NO_ROOM = (
    "failed to map segment",
    "Cannot allocate memory",
    "cannot allocate memory",
    "`scipy` install you are using seems to be broken",
    "can't start new thread",
    "Resource temporarily unavailable",
)
"""What system and libraries say that get no memory or no thread."""
INTERRUPTED = 130


class LazyGroup(click.Group):
    """A group that imports a command only when it is called."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002  signature of the library
        """Return the names of the commands, without loading any."""
        return sorted(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002
        """Load and return one command."""
        if cmd_name not in COMMANDS:
            return None
        command = importlib.import_module(f"stillbench.cli.{cmd_name}").command
        if not isinstance(command, click.Command):
            raise TypeError(cmd_name)
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:  # noqa: ARG002
        """Write the list of commands from their one-line descriptions, without loading any."""
        with formatter.section("Commands"):
            formatter.write_dl(sorted(COMMANDS.items()))


@click.group(cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="stillbench")
def group() -> None:
    """Qualify rate sensors and accelerometers from logs taken at rest."""


def main(arguments: Sequence[str] | None = None) -> None:
    """Run the command line.

    Errors are one line on stderr, never a traceback. Exit codes: 0 conforms or nothing to judge, 1 the log or the
    analysis failed, 2 usage, 3 a requirement is not met, 4 none is missed but one is undecided.
    """
    sys.exit(_run(arguments))


def _run(arguments: Sequence[str] | None) -> int:  # noqa: PLR0911  one return a way to end
    try:
        code = group.main(args=arguments, prog_name="stillbench", standalone_mode=False)
    except click.exceptions.NoArgsIsHelpError as error:
        click.echo(error.format_message(), err=True)
        return USAGE
    except click.ClickException as error:
        context = getattr(error, "ctx", None)
        where = f" (see {context.command_path} --help)" if context else ""
        click.echo(f"stillbench: {error.format_message()}{where}", err=True)
        return USAGE
    except (click.Abort, KeyboardInterrupt):
        click.echo("stillbench: interrupted; nothing was written", err=True)
        return INTERRUPTED
    except BrokenPipeError:
        # The reader of our output has gone (a pager was closed): nothing is left to say.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except MemoryError:
        click.echo(NO_MEMORY, err=True)
        return 1
    except Exception as error:
        if any(sign in f"{error} {error.__cause__}" for sign in NO_ROOM):
            click.echo(NO_MEMORY, err=True)
            return 1
        if os.environ.get("STILLBENCH_TRACEBACK"):
            raise
        from stillbench.foundation.errors import StillbenchError  # noqa: PLC0415  not needed for --help

        if isinstance(error, StillbenchError):
            click.echo(f"stillbench: {error.message}", err=True)
            return error.exit_code
        click.echo(
            f"stillbench: an error of the program itself ({type(error).__name__}: {str(error)[:200]}); nothing was"
            " written. Run again with STILLBENCH_TRACEBACK=1 and send what it prints.",
            err=True,
        )
        return 1
    return code if isinstance(code, int) else 0
