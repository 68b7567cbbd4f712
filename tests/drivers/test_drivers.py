"""All four drivers against the simulated rig's front panels, inside pyvisa-sim and over TCP."""

import asyncio
from collections.abc import AsyncIterator, Awaitable, Callable
from contextlib import asynccontextmanager
from dataclasses import dataclass, replace

import pytest
import pyvisa

from drivers import capabilities
from drivers.dialect import load_dialect
from drivers.opening import (
    open_gauge,
    open_lock_in,
    open_magnet_supply,
    open_temperature_controller,
    visa_manager,
)
from simulators.faults import FaultyPanel
from simulators.front_panel import FrontPanel
from simulators.panels import panels
from simulators.tcp import serve
from simulators.visa import attach
from simulators.world import World
from tests.simulators.rigs import Clock, quiet


@dataclass
class Rig:
    """A simulated rig and how to reach it."""

    world: World
    clock: Clock
    panels: dict[str, FrontPanel]
    manager: pyvisa.ResourceManager
    addresses: dict[str, str]
    inline: bool

    async def magnet(self) -> capabilities.MagnetSupply:
        return await open_magnet_supply(
            self.manager,
            self.addresses["magnet"],
            load_dialect("plain-scpi-magnet"),
            name="magnet",
            inline=self.inline,
        )


@asynccontextmanager
async def rig(transport: str, switch: bool = True) -> AsyncIterator[Rig]:
    clock = Clock()
    parameters = quiet()
    parameters = replace(parameters, coil=replace(parameters.coil, switch_present=switch))
    world = World(parameters, clock)
    front = {name: FaultyPanel(panel) for name, panel in panels(world).items()}
    if transport == "sim":
        kinds = {"stage": "GPIB0::4::INSTR"}
        addresses = {n: kinds.get(n, f"TCPIP0::{n}.sim::5025::SOCKET") for n in front}
        manager = attach({addresses[name]: panel for name, panel in front.items()})
        yield Rig(world, clock, dict(front), manager, addresses, inline=True)
        return
    served = await serve(front)
    manager = visa_manager("@py")
    yield Rig(world, clock, dict(front), manager, served.addresses, inline=False)
    await served.close()


def run(body: Callable[[Rig], Awaitable[None]], transport: str, switch: bool = True) -> None:
    async def whole() -> None:
        async with rig(transport, switch) as opened:
            await asyncio.wait_for(body(opened), 20)

    asyncio.run(whole())


both = pytest.mark.parametrize("transport", ["sim", "tcp"])


@both
def test_magnet_is_ramped_and_every_write_is_read_back(transport: str) -> None:
    async def body(rig: Rig) -> None:
        magnet = await rig.magnet()
        assert "SIMULATED MAGNET SUPPLY" in await magnet.identity()
        before = await magnet.read()
        assert before == capabilities.MagnetState(0.0, 0.0, 0.0, False, False, False, 0.0)
        written = await magnet.write_switch_heater(True)
        assert written.read_back is True
        assert "HEAT 1" in written.sent
        rig.clock.time_s = 60.0
        assert (await magnet.write_rate(0.005)).read_back == pytest.approx(0.005, rel=1e-9)
        assert (await magnet.write_target(-1.25)).read_back == -1.25
        assert (await magnet.write_ramping(True)).read_back is True
        assert await magnet.read_rate() == pytest.approx(0.005, rel=1e-9)
        assert await magnet.read_target() == -1.25
        rig.clock.time_s = 160.0
        state = await magnet.read()
        coil = rig.world.coil.parameters
        assert state.field_t == pytest.approx(-0.5, rel=1e-6)
        assert state.current_a == pytest.approx(-0.5 / coil.coil_constant_t_per_a, rel=1e-6)
        assert state.ramping
        assert state.switch_heater
        assert not state.quench
        rig.world.quench()
        rig.clock.time_s = 161.0
        assert (await magnet.read()).quench
        await magnet.close()
        await magnet.close()

    run(body, transport)


@both
def test_stage_setpoint_ramp_and_heater(transport: str) -> None:
    async def body(rig: Rig) -> None:
        stage = await open_temperature_controller(
            rig.manager,
            rig.addresses["stage"],
            load_dialect("plain-scpi-temperature"),
            name="stage",
            inline=rig.inline,
        )
        assert (await stage.write_setpoint_ramp(0.01)).read_back == 0.01
        assert (await stage.write_heater(True)).read_back is True
        assert (await stage.write_setpoint(2.0)).read_back == 2.0
        rig.clock.time_s = 600.0
        state = await stage.read()
        assert state.setpoint_k == pytest.approx(2.0)
        assert state.temperature_k == pytest.approx(2.0, abs=0.01)
        assert state.heater_w > 0
        await stage.close()

    run(body, transport)


@both
def test_lock_in_settings_and_xy_of_one_instant(transport: str) -> None:
    async def body(rig: Rig) -> None:
        lock_in = await open_lock_in(
            rig.manager,
            rig.addresses["xx"],
            load_dialect("plain-scpi-lockin"),
            name="xx",
            inline=rig.inline,
        )
        assert (await lock_in.write_time_constant(0.3)).read_back == 0.3
        assert (await lock_in.write_filter_order(4)).read_back == 4
        assert (await lock_in.write_sensitivity(1e-3)).read_back == 1e-3
        assert (await lock_in.write_amplitude(0.5)).read_back == 0.5
        assert (await lock_in.write_frequency(17.77)).read_back == 17.77
        rig.clock.time_s = 30.0
        state = await lock_in.read()
        model = rig.world.lock_ins["xx"]
        x, y = model.read()
        assert state.x_v == pytest.approx(x, abs=1e-9)
        assert state.y_v == pytest.approx(y, abs=1e-9)
        assert state.x_v > 0
        assert not state.overload
        await lock_in.write_sensitivity(1e-9)
        rig.clock.time_s = 60.0
        assert (await lock_in.read()).overload
        await lock_in.close()

    run(body, transport)


@both
def test_gauge_reads_percent(transport: str) -> None:
    async def body(rig: Rig) -> None:
        gauge = await open_gauge(
            rig.manager,
            rig.addresses["helium"],
            load_dialect("plain-scpi-gauge"),
            name="helium",
            inline=rig.inline,
        )
        assert await gauge.read() == pytest.approx(rig.world.helium.percent, rel=1e-8)
        await gauge.close()

    run(body, transport)
