"""The bench opens a rig's instruments, and says what is wrong with a dialect where it is named."""

import asyncio
import re
from pathlib import Path

import pytest

from orchestrator.bench import channels_of, load_dialects, open_bench
from orchestrator.config.document import ConfigError
from orchestrator.config.rig import load_rig
from simulators.panels import panels
from simulators.visa import attach
from simulators.world import GaugeParameters, LockInParameters, World, WorldParameters

SHIPPED = Path(__file__).parents[1] / "sequences" / "rigs" / "demonstration.toml"


def test_every_instrument_is_opened_and_fills_its_channels() -> None:
    rig, document = load_rig(SHIPPED)
    lock_ins = (LockInParameters("rxx"), LockInParameters("rxy", "hall"))
    world = World(
        WorldParameters(lock_ins=lock_ins, gauges=(GaugeParameters("helium"),)), lambda: 0.0
    )
    made = panels(world)
    at = {name: f"TCPIP0::{name}.sim::5025::SOCKET" for name in made}

    async def scene() -> None:
        manager = attach({at[name]: panel for name, panel in made.items()})
        bench = await open_bench(rig, document, manager, inline=True)
        assert bench.instruments == ("magnet", "stage", "rxx", "rxy", "helium")
        assert all("SIMULATED" in one for one in (await bench.identities()).values())
        channels = channels_of(rig)
        for instrument in bench.instruments:
            values = await bench.read(instrument)
            assert set(values) == {one.name for one in channels if one.instrument == instrument}
        await bench.close()

    asyncio.run(scene())


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        (
            '"plain-scpi-magnet"',
            '"grand-magnet"',
            r'magnet\.dialect = "grand-magnet": is not a shi',
        ),
        ('"plain-scpi-magnet"', '"own.toml"', r"line \d+: magnet\.dialect .*there is no file"),
        ('"plain-scpi-gauge"', '"plain-scpi-lockin"', r"gauge\[1\]\.dialect .*dialect of a lockin"),
        (
            '"plain-scpi-lockin"',
            '"plain-scpi-gauge"',
            r"allowed: a lockin dialect: plain-scpi-lock",
        ),
    ],
)
def test_a_wrong_dialect_is_told_where_the_rig_file_names_it(
    tmp_path: Path, old: str, new: str, words: str
) -> None:
    file = tmp_path / "rig.toml"
    file.write_text(SHIPPED.read_text(encoding="utf-8").replace(old, new, 1), encoding="utf-8")
    with pytest.raises(ConfigError) as caught:
        load_dialects(*load_rig(file))
    assert re.search(words, str(caught.value)), str(caught.value)


def test_a_laboratorys_own_dialect_is_found_beside_its_rig_file(tmp_path: Path) -> None:
    own = Path(__file__).parents[1] / "drivers" / "dialects" / "plain-scpi-magnet.toml"
    (tmp_path / "own.toml").write_text(own.read_text(encoding="utf-8"), encoding="utf-8")
    file = tmp_path / "rig.toml"
    text = SHIPPED.read_text(encoding="utf-8").replace('"plain-scpi-magnet"', '"own.toml"')
    file.write_text(text, encoding="utf-8")
    assert load_dialects(*load_rig(file))["magnet"].kind == "magnet"
