"""``nightfield simulate``: the simulated rig on sockets of this computer, for live rehearsals."""

import asyncio
import re
from pathlib import Path
from typing import Annotated

import typer

from orchestrator.children import until_owner_has_gone
from orchestrator.cli.failing import Failed, input_errors
from orchestrator.cli.options import Seed, WorldPath

_NO_RULE = "simulated instruments on this computer: no facility rule applies"


def simulate(
    rig: Annotated[
        Path | None, typer.Argument(help="Rig file; the shipped demonstration rig if left out.")
    ] = None,
    write_rig: Annotated[
        Path | None,
        typer.Option(help="Write a copy of the rig file whose addresses point at the simulation."),
    ] = None,
    world: WorldPath = None,
    seed: Seed = None,
    pace: Annotated[
        float, typer.Option(help="How many times faster than the wall the simulated time runs.")
    ] = 1.0,
    owned: Annotated[bool, typer.Option(hidden=True)] = False,
) -> None:
    """Serve the simulated rig's instruments on sockets of this computer, until Ctrl-C.

    Example: nightfield simulate rig.toml --write-rig live.toml, and in another terminal:
    nightfield run evening.toml --rig live.toml
    """
    if not 0 < pace <= 10_000:
        raise Failed(f"--pace {pace:g} is not allowed: a number above 0 to 10000")
    with input_errors():
        from orchestrator.cli.composition import DEMONSTRATION_RIG, load_simulated, shipped
        from orchestrator.config.rig import load_rig
        from orchestrator.engine.clock import PacedLoop

        model, document = load_rig(rig or shipped(DEMONSTRATION_RIG))
        simulated = load_simulated(world, model)

        async def serve_until_told() -> None:
            from orchestrator.cli.composition import addresses_of, world_parameters
            from simulators.panels import panels
            from simulators.tcp import serve
            from simulators.world import World

            number = simulated.world.about.seed if seed is None else seed
            clock = asyncio.get_running_loop().time
            the_world = World(world_parameters(model, simulated.world, number), clock)
            served = await serve(panels(the_world))
            try:
                for name, address in served.addresses.items():
                    typer.echo(f"{name:<10} {address}")
                if write_rig:
                    text = live_rig_text(document.text, addresses_of(model), served.addresses)
                    _write(write_rig, text)
                    typer.echo(f"rig file   {write_rig}")
                typer.echo("serving until Ctrl-C" if not owned else "serving")
                await (until_owner_has_gone() if owned else asyncio.Event().wait())
            finally:
                await served.close()

        try:
            with asyncio.Runner(loop_factory=lambda: PacedLoop(pace)) as runner:
                runner.run(serve_until_told())
        except KeyboardInterrupt:
            typer.echo("stopped")


def live_rig_text(text: str, old: dict[str, str], new: dict[str, str]) -> str:
    """A rig file's text with the simulation's addresses, and with nobody's rules asked for."""
    for name, address in old.items():
        text = text.replace(f'"{address}"', f'"{new[name]}"')
    for key in ("rules", "contact", "permission"):
        text = re.sub(rf'^{key} = ""$', f'{key} = "{_NO_RULE}"', text, flags=re.MULTILINE)
    if not re.search(r"^\[facility\]", text, flags=re.MULTILINE):
        lines = "\n".join(f'{key} = "{_NO_RULE}"' for key in ("rules", "contact", "permission"))
        text += f"\n[facility]\n{lines}\n"
    return (
        "# Written by nightfield simulate: these addresses are simulated instruments.\n"
        "# For real instruments use your own rig file, not this one.\n" + text
    )


def _write(path: Path, text: str) -> None:
    try:
        temporary = path.with_name(path.name + ".part")
        temporary.write_text(text, encoding="utf-8")
        temporary.replace(path)
    except OSError as error:
        raise Failed(f"--write-rig {path}: cannot be written: {error.strerror}") from error
