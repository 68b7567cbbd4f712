"""An invented rig's channels and readings, for the tests of the ledger and of the stream."""

import math

from orchestrator.ledger.records import NightDescription
from orchestrator.readings import Channel, Reading

CHANNELS = (
    Channel("field_t", "T", "magnet"),
    Channel("quench", "", "magnet"),
    Channel("sample_k", "K", "stage"),
    Channel("rxx_x_v", "V", "rxx"),
)

DESCRIPTION = NightDescription(
    night="2031-04-05-a",
    rig="cellar",
    sequence="first-ladder",
    mode="rehearsal",
    started_unix_s=1.9e9,
    program_version="0.1.0",
    seed=7,
    broker="127.0.0.1:1883",
    rig_text="[rig]\nname = 'cellar'\n",
    sequence_text="[[step]]\n",
    world_text="[sample]\n",
    truth={"orbits": [{"frequency_t": 320.0, "mass": 0.07}]},
)


def reading(number: int, unix_s: float = 1.9e9) -> Reading:
    """Reading of a rig whose stage is silent at every seventh number."""
    silent = number % 7 == 0
    taken = {"magnet": number * 0.1 + 0.01, "rxx": number * 0.1 + 0.02}
    if not silent:
        taken["stage"] = number * 0.1 + 0.03
    return Reading(
        number=number,
        time_s=number * 0.1,
        unix_s=unix_s + number * 0.1,
        step=f"sweep {number // 50}",
        values={
            "field_t": 0.001 * number,
            "quench": 0.0,
            "sample_k": math.nan if silent else 1.5 + 1e-6 * number,
            "rxx_x_v": 1e-6 * math.sin(number),
        },
        taken_s=taken,
    )
