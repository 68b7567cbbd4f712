"""The cautions that are shown to people, with the rig's own numbers."""

from orchestrator.config.rig import Rig
from orchestrator.physics.helium import boiled_litres, gas_m3
from orchestrator.physics.magnet import current_a, stored_energy_j

DECIDES = "The facility's rules and authorised persons decide."


def cautions(rig: Rig) -> list[str]:
    """One sentence or more for each danger, each ending with who decides."""
    magnet = rig.magnet
    current = current_a(magnet.field_max_t, magnet.coil_constant_t_per_a)
    energy_j = stored_energy_j(magnet.inductance_h, current)
    litres = boiled_litres(energy_j)
    gas = gas_m3(litres)
    return [
        "nightfield is a second line, never the first: the magnet's own quench protection, the "
        "supply's hard limits, relief valves and oxygen monitors come before it, and it is not a "
        f"safety instrumented function. {DECIDES}",
        f"At {magnet.field_max_t:g} T the magnet stores {energy_j / 1000:.0f} kJ. A quench turns "
        f"this into up to {litres:.0f} litres of boiled helium, {gas:.0f} m³ of gas at room "
        "temperature, within seconds (boiling at 101325 Pa, figures of CoolProp). It cannot be "
        "stopped, vents cold gas, and may over-press a room so that a door does not open. "
        f"{DECIDES}",
        "Helium gas takes the place of oxygen without warning; below 19.5 % the air is deficient "
        "(OSHA 29 CFR 1910.146; other countries differ). Cold gas, liquid and metal burn, and "
        f"what is closed and warms up bursts. {DECIDES}",
        "The stray field reaches beyond the cryostat: pacemakers and implants stay outside, loose "
        "iron too. The line usually marked is 0.5 mT (second-hand from ICNIRP 2009); the "
        f"facility's own marking decides. {DECIDES}",
        f"The current leads carry {current:.0f} A and the magnet's energy: opening them makes a "
        f"voltage that kills (common practice). {DECIDES}",
        f"Unattended running only where the facility permits it. {DECIDES}",
    ]
