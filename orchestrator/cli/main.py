"""The command ``nightfield``: one file per command beside this one."""

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
from orchestrator.cli.telling import tell
from orchestrator.cli.watch import watch

app = typer.Typer(
    name="nightfield",
    help="Plan, rehearse, guard, record and analyse an unattended night of quantum oscillations.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
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
    try:
        app()
    except Failed as failure:
        tell(f"nightfield: {failure}")
        sys.exit(failure.code)


if __name__ == "__main__":
    main()
