"""The command ``nightfield``: one file per command beside this one."""

import os
import sys

import typer

from orchestrator.cli.analyse import analyse
from orchestrator.cli.ask import acknowledge, hold, park
from orchestrator.cli.failing import Failed
from orchestrator.cli.forecast import forecast
from orchestrator.cli.new import new
from orchestrator.cli.rehearse import rehearse
from orchestrator.cli.run import run
from orchestrator.cli.simulate import simulate
from orchestrator.cli.telling import spell_out_where_needed, tell
from orchestrator.cli.watch import watch

app = typer.Typer(
    name="nightfield",
    help="Plan, rehearse, guard, record and analyse an unattended night of quantum oscillations.",
    epilog="Exit codes: 0 done, 1 a fault of the computer or of this program, or a request that "
    "nobody took up, 2 something that you gave is wrong, 3 the night ended early, 130 stopped by "
    "Ctrl-C.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode="markdown",  # paragraphs of help are filled to the terminal's width
)
for command in (
    new,
    forecast,
    rehearse,
    run,
    watch,
    hold,
    park,
    acknowledge,
    analyse,
    simulate,
):
    app.command()(command)


def main() -> None:
    """Run the command line; a mistake in a file or a word gives one message and exit code 2."""
    spell_out_where_needed()
    try:
        try:
            app()
        finally:
            sys.stdout.flush()
    except Failed as failure:
        tell(f"nightfield: {failure}")
        sys.exit(failure.code)
    except BrokenPipeError:
        _forget_output()
        sys.exit(1)
    except OSError as error:
        tell(f"nightfield: {error.filename or 'the result'}: {error.strerror or error}")
        _forget_output()
        sys.exit(1)


def _forget_output() -> None:
    """Whoever read the result has gone: let the interpreter not try once more at its end."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


if __name__ == "__main__":
    main()
