"""What a simulated second costs: `python -m tests.simulators.measure_cost` (not a test)."""

import time
from dataclasses import replace

from simulators.panels import panels
from simulators.visa import attach
from simulators.world import World
from tests.simulators.rigs import Clock, quiet, sweep

LINES = {
    "magnet": "MEAS:FIEL?;CURR?;VOLT?;:SOUR:FIEL:RAMP:STAT?;:STAT:QUES:COND?;"
    ":OUTP:SWIT:HEAT?;:SOUR:FIEL:PERS?",
    "stage": "MEAS:TEMP?;:SOUR:TEMP:SPO?;:MEAS:HEAT:POW?",
    "xx": "MEAS:XY?;:STAT:QUES:COND?",
    "xy": "MEAS:XY?;:STAT:QUES:COND?",
    "helium": "MEAS:LEV?",
}
SECONDS = 4000


def main() -> None:
    """Print microseconds a simulated second, at 4 T to 12 T and 2 mT/s, two orbits."""
    p = quiet()
    clock = Clock()
    noisy = tuple(replace(lock_in, noise_v_per_rthz=5e-9) for lock_in in p.lock_ins)
    world = World(replace(p, lock_ins=noisy), clock)
    rig = panels(world)
    sweep(world, 4.0, 0.05)
    clock.time_s = 200.0
    sweep(world, 12.0, 0.002)
    manager = attach({f"TCPIP::{name}.sim::5025::SOCKET": rig[name] for name in LINES})
    links = {
        name: manager.open_resource(
            f"TCPIP::{name}.sim::5025::SOCKET", read_termination="\n", write_termination="\n"
        )
        for name in LINES
    }
    spent = {"physics": 0.0, "panels": 0.0, "pyvisa": 0.0}
    for _ in range(SECONDS):
        clock.time_s += 1.0
        start = time.perf_counter()
        world.advance()
        advanced = time.perf_counter()
        for name, line in LINES.items():
            rig[name].execute(line)
        read = time.perf_counter()
        for name, line in LINES.items():
            links[name].query(line)  # type: ignore[attr-defined]
        spent["physics"] += advanced - start
        spent["panels"] += read - advanced
        spent["pyvisa"] += time.perf_counter() - read
    for name, seconds in spent.items():
        print(f"{name:8} {seconds / SECONDS * 1e6:6.1f} us a simulated second")


if __name__ == "__main__":
    main()
