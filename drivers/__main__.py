"""``python -m drivers DIALECT``: check a dialect, show what it says, and try it without writing."""

import argparse
import asyncio
import sys
from collections.abc import Awaitable, Callable

from drivers.dialect import Dialect, DialectError, load_dialect
from drivers.errors import LinkError
from drivers.gauge import ScpiGauge
from drivers.kinds import Kind
from drivers.lockin import ScpiLockIn
from drivers.magnet_supply import ScpiMagnetSupply
from drivers.opening import (
    open_gauge,
    open_lock_in,
    open_magnet_supply,
    open_temperature_controller,
    visa_manager,
)
from drivers.temperature_controller import ScpiTemperatureController


def shown(dialect: Dialect, coil_constant_t_per_a: float | None) -> str:
    """What the dialect says, one message a line."""
    lines = [f"{dialect.name}: {dialect.kind}"]
    lines.append(f"  who is there   {dialect.content.identity.query}")
    lines += [f"  look           {m}" for m, _ in dialect.look(coil_constant_t_per_a).exchanges()]
    for name, setting in dialect.settings(coil_constant_t_per_a).items():
        between = setting.joins or ", then "
        lines.append(f"  {name:<14} {setting.command}{between}{setting.question.query}")
    lines.append(f"  cannot set     {', '.join(dialect.lacks) or '-'}")
    return "\n".join(lines)


Driver = ScpiMagnetSupply | ScpiTemperatureController | ScpiLockIn | ScpiGauge

_OPENERS: dict[Kind, Callable[..., Awaitable[Driver]]] = {
    "magnet": open_magnet_supply,
    "temperature": open_temperature_controller,
    "lockin": open_lock_in,
    "gauge": open_gauge,
}


async def tried(dialect: Dialect, address: str, library: str, coil: float | None) -> str:
    """Identity and one look of the instrument at an address."""
    more = {"coil_constant_t_per_a": coil} if dialect.kind == "magnet" else {}
    driver = await _OPENERS[dialect.kind](
        visa_manager(library), address, dialect, name=dialect.kind, inline=True, **more
    )
    try:
        return f"{driver.link.identity}\n{await driver.read()}"
    finally:
        await driver.close()


def main(arguments: list[str] | None = None) -> int:
    """Run. 0 if all is well, 1 if the dialect is wrong, 2 if the instrument does not answer."""
    parser = argparse.ArgumentParser(prog="python -m drivers", description=__doc__)
    parser.add_argument("dialect", help="name of a shipped dialect, or path of a .toml file")
    parser.add_argument("--coil-constant", type=float, help="T/A, for a supply that speaks in A")
    parser.add_argument("--address", help="VISA address: ask who is there, and look once")
    parser.add_argument("--library", default="@py", help="VISA library (@py, @ivi, or a path)")
    given = parser.parse_args(arguments)
    try:
        dialect = load_dialect(given.dialect)
        print(shown(dialect, given.coil_constant))
        if given.address:
            print(asyncio.run(tried(dialect, given.address, given.library, given.coil_constant)))
    except DialectError as error:
        print(error, file=sys.stderr)
        return 1
    except LinkError as error:
        print(error, file=sys.stderr)
        return 2
    return 0


if __name__ == "__main__":
    sys.exit(main())
