"""Serial numbers of simulated instruments: the same for the same world and name."""

import zlib

from simulators.world import World


def serial_of(world: World, name: str) -> str:
    """Eight hexadecimal digits."""
    return f"{zlib.crc32(f'{world.parameters.seed}/{name}'.encode()):08X}"
