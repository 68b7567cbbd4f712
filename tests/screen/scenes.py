"""Messages of an invented night, at a moment that a test wants to look at."""

import math
from typing import Any

from orchestrator.readings import Channel, Reading
from orchestrator.stream.messages import (
    EventMessage,
    FindingMessage,
    Message,
    NightState,
    ReadingBatch,
    StateMessage,
)

START_UNIX_S = 1.9e9
RIG, NIGHT = "lantern-cellar", "2030-03-17-ladder"
CHANNELS = (
    Channel("field_t", "T", "magnet"),
    Channel("current_a", "A", "magnet"),
    Channel("sample_k", "K", "stage"),
    Channel("setpoint_k", "K", "stage"),
    Channel("rxx_x_v", "V", "rxx"),
    Channel("rxx_overload", "", "rxx"),
    Channel("helium_percent", "", "helium"),
)
MARGINS: dict[str, float | None] = {
    "quench-flag": 1.0,
    "current-collapse": 0.93,
    "unexplained-voltage": 0.81,
    "field-ceiling": 0.305,
    "over-temperature": 1.0,
    "level-helium": 0.57,
    "stale-magnet": 0.9,
    "stale-stage": 0.9,
    "stale-rxx": 0.9,
    "stale-helium": 0.9,
    "ramp-ceiling": 0.12,
    "ramp-stalled": 1.0,
}
ORBITS: list[dict[str, Any]] = [
    {
        "frequency_t": 410.0213,
        "frequency_sd_t": 0.0123,
        "mass": 0.1899,
        "mass_sd": 0.0008,
        "dingle_k": 1.302,
        "dingle_sd_k": 0.021,
        "amplitude_ohm": 1.01,
        "signal_to_noise": 212.3,
    },
    {
        "frequency_t": 1130.4,
        "frequency_sd_t": 0.31,
        "mass": None,
        "mass_sd": None,
        "dingle_k": None,
        "dingle_sd_k": None,
        "amplitude_ohm": None,
        "signal_to_noise": 11.2,
    },
]
FINDING: dict[str, Any] = {
    "after": "sweep-2",
    "sweeps": 2,
    "orbits": ORBITS,
    "hall": {
        "density_m2": 2.08e18,
        "density_sd_m2": 3e15,
        "mobility_m2_per_vs": None,
        "mobility_sd_m2_per_vs": None,
    },
    "problem": "",
}


class Scene:
    """Hands out messages with the right numbers; time runs with `run`."""

    def __init__(self, night: str = NIGHT) -> None:
        self.night = night
        self.time_s = 0.0
        self.number = 0
        self.event_id = 0
        self.messages: list[Message] = []

    @property
    def unix_s(self) -> float:
        """Wall time of the scene's now."""
        return START_UNIX_S + self.time_s

    def event(
        self, kind: str, name: str, text: str = "", severity: str = "info", **data: Any
    ) -> EventMessage:
        self.event_id += 1
        message = EventMessage(
            night=self.night,
            rig=RIG,
            seq=self.event_id,
            time_s=self.time_s,
            unix_s=self.unix_s,
            event_kind=kind,
            name=name,
            severity=severity,
            text=text,
            data=data,
        )
        self.messages.append(message)
        return message

    def run(
        self,
        seconds: int,
        step: str,
        from_t: float,
        to_t: float,
        kelvin: float = 1.5,
        silent: tuple[str, ...] = (),
        **values: float,
    ) -> None:
        """Readings each second on a straight way from one field to another."""
        rows = []
        for second in range(1, seconds + 1):
            self.time_s += 1.0
            self.number += 1
            field_t = from_t + (to_t - from_t) * second / seconds
            ohm = 100 + field_t**2 / 10
            if field_t > 1:
                size = 20 * math.exp(-25 / field_t)
                ohm += size * math.cos(2 * math.pi * 410 / field_t)
            of_channel = {
                "field_t": field_t,
                "current_a": field_t / 0.12,
                "sample_k": kelvin + 1e-4 * math.sin(self.number),
                "setpoint_k": kelvin,
                "rxx_x_v": ohm * 1e-6,
                "rxx_overload": 0.0,
                "helium_percent": 69.0 - self.time_s / 3600 * 1.8,
            } | values
            taken = {c.instrument: self.time_s for c in CHANNELS if c.instrument not in silent}
            for channel in CHANNELS:
                if channel.instrument in silent:
                    of_channel[channel.name] = math.nan
            rows.append(Reading(self.number, self.time_s, self.unix_s, step, of_channel, taken))
        for at in range(0, len(rows), 200):
            batch = ReadingBatch.of(rows[at : at + 200], CHANNELS, night=self.night, rig=RIG)
            self.messages.append(batch)

    def state(self, **more: Any) -> None:
        self.messages.append(
            StateMessage(
                night=self.night,
                rig=RIG,
                seq=self.number + 1,
                state=NightState(**({"margins": MARGINS} | more)),
                last_reading=self.number,
                last_event=self.event_id,
            )
        )

    def finding(self, data: dict[str, Any]) -> None:
        self.messages.append(
            FindingMessage(night=self.night, rig=RIG, seq=1, source="analyst", data=data)
        )


def begun() -> Scene:
    """A night of a settle, a sweep up, and a sweep down, before its first reading."""
    scene = Scene()
    lock_in = {"name": "rxx", "measures": "longitudinal", "excitation_a": 1e-6}
    scene.event(
        "night",
        "started",
        lock_ins=[lock_in | {"time_constant_s": 0.3, "poles": 4}],
        interval_s=1.0,
        forecast_s=9000.0,
        steps=[
            {"name": "settle-1", "start_s": 0.0, "duration_s": 600.0},
            {"name": "sweep-1", "start_s": 600.0, "duration_s": 3600.0},
            {"name": "sweep-2", "start_s": 4200.0, "duration_s": 3600.0},
            {"name": "park", "start_s": 7800.0, "duration_s": 1200.0},
        ],
    )
    return scene


def sweeping() -> Scene:
    """In the middle of the first sweep, at 8.4 T and rising, with findings; all is well."""
    scene = begun()
    scene.event("step", "settle-1", phase="started", type="settle", temperature_k=1.5)
    scene.run(660, "settle-1", 3.0, 3.0)
    scene.event("step", "settle-1", phase="finished", type="settle", outcome="done")
    about: dict[str, Any] = {
        "type": "field-sweep",
        "from_t": 3.0,
        "to_t": 12.0,
        "temperature_k": 1.5,
    }
    scene.event(
        "plan",
        "sweep-1",
        "before the sweep",
        step="sweep-1",
        reason="before the sweep",
        legs=[[3.0, 9.0, 0.003, "samples a period"], [9.0, 12.0, 0.002, "magnet table"]],
        duration_s=3500.0,
        orbits=[],
    )
    scene.event("step", "sweep-1", phase="started", first_reading=661, **about)
    scene.run(1800, "sweep-1", 3.0, 8.4)
    scene.finding(FINDING)
    scene.state(step="sweep-1")
    return scene
