"""The simulated rig: a reading set twice a second, from physics to the words of its panels."""

import time
from typing import Any

import psutil  # type: ignore[import-untyped]

from orchestrator.cli.composition import load_files, load_simulated, world_parameters
from simulators.front_panel import FrontPanel
from simulators.panels import panels
from simulators.visa import attach
from simulators.world import World
from tests.bench.outcome import Outcome
from tests.bench.timing import Figure, Spent

LINES = {
    "magnet": "MEAS:FIEL?;CURR?;VOLT?;:SOUR:FIEL:RAMP:STAT?;:STAT:QUES:COND?;"
    ":OUTP:SWIT:HEAT?;:SOUR:FIEL:PERS?",
    "stage": "MEAS:TEMP?;:SOUR:TEMP:SPO?;:MEAS:HEAT:POW?",
    "rxx": "MEAS:XY?;:STAT:QUES:COND?",
    "rxy": "MEAS:XY?;:STAT:QUES:COND?",
    "helium": "MEAS:LEV?",
}
INTERVAL_S = 0.5


class Rig:
    """The demonstration world, swept up and down between 4 T and 8 T for ever."""

    def __init__(self) -> None:
        files = load_files(None, None)
        self.now_s = 0.0
        world_file = load_simulated(None, files.rig).world
        self.world = World(world_parameters(files.rig, world_file, 20), lambda: self.now_s)
        self.panels: dict[str, FrontPanel] = panels(self.world)
        self.panels["magnet"].execute("OUTP:SWIT:HEAT 1")
        self.now_s = 60.0
        self.panels["magnet"].execute("SOUR:FIEL:RATE 5 MT/S;TARG 4;RAMP:STAT 1")
        self.panels["stage"].execute("SOUR:TEMP:SPO 1.2;:OUTP:HEAT:STAT 1")
        self.now_s = 1000.0
        self.panels["magnet"].execute("SOUR:FIEL:RATE 2 MT/S;TARG 8")
        self.up = True

    def turn(self) -> None:
        """Send the field back when it has arrived."""
        if self.world.coil.lead_t == self.world.coil.target_t:
            self.up = not self.up
            self.panels["magnet"].execute(f"SOUR:FIEL:TARG {8 if self.up else 4}")

    def sets(self, count: int) -> tuple[float, float]:
        """Seconds of physics and of panels for so many reading sets."""
        physics_s = panels_s = 0.0
        for number in range(count):
            self.now_s += INTERVAL_S
            if number % 100 == 0:
                self.turn()
            start = time.perf_counter()
            self.world.advance()
            advanced = time.perf_counter()
            for name, line in LINES.items():
                self.panels[name].execute(line)
            panels_s += time.perf_counter() - advanced
            physics_s += advanced - start
        return physics_s, panels_s


def memory_mb() -> float:
    """What this process holds now, MB."""
    return float(psutil.Process().memory_info().rss) / 1e6


def run(quick: bool) -> Outcome:
    """Early in a night and late, and what pyvisa-sim adds."""
    count, meanwhile, rounds = (1000, 4000, 3) if quick else (2000, 300_000, 7)
    rig = Rig()
    rig.sets(1000)
    early, early_mb = [rig.sets(count) for _ in range(rounds)], memory_mb()
    rig.sets(meanwhile)
    late_mb = memory_mb()
    addresses = {name: f"TCPIP0::{name}.sim::5025::SOCKET" for name in LINES}
    manager = attach({addresses[name]: rig.panels[name] for name in LINES})
    links: dict[str, Any] = {
        name: manager.open_resource(address, read_termination="\n", write_termination="\n")
        for name, address in addresses.items()
    }

    def through_visa() -> float:
        start = time.perf_counter()
        for _ in range(count):
            rig.now_s += INTERVAL_S
            for name, line in LINES.items():
                links[name].query(line)
        return time.perf_counter() - start

    late, visa_s = [], []
    for _ in range(rounds):
        late.append(rig.sets(count))
        visa_s.append(through_visa())
        rig.turn()
    manager.close()
    direct, visa = Spent(tuple(map(sum, late))), Spent(tuple(visa_s))
    return Outcome(
        {
            "physics, us a reading set": Spent(tuple(one for one, _ in late)).per(count),
            "panels, us a reading set": Spent(tuple(one for _, one in late)).per(count),
            "physics and panels through pyvisa-sim, us a set": visa.per(count),
            f"memory grown in {meanwhile} sets, MB": Figure(late_mb - early_mb),
        },
        {
            "through pyvisa-sim / called directly": visa.over(direct),
            "physics and panels, late / early": direct.over(Spent(tuple(map(sum, early)))),
        },
    )
