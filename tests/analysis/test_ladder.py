"""Orbits found blind, fitted together, and not found where there are none."""

import time
from dataclasses import replace

import numpy as np
import pytest

from orchestrator.analysis.findings import OrbitFinding
from orchestrator.analysis.ladder import (
    analyse_directions,
    analyse_ladder,
    find_orbits,
    fit_ladder,
)
from orchestrator.analysis.sweeps import AnalysisError, Sweep
from tests.analysis.simulated import (
    HEAVY,
    LIGHT,
    TrueOrbit,
    fields,
    simulated_ladder,
    simulated_sweep,
)

FIELD = fields(3.0, 12.0, 1130.0, 0.3 / 60)


def assert_within(finding: OrbitFinding, truth: TrueOrbit, sigmas: float = 4.5) -> None:
    """Every parameter within so many of its own standard deviations."""
    assert abs(finding.frequency_t - truth.frequency_t) < sigmas * finding.frequency_sd_t
    assert abs(finding.beta - truth.beta) < sigmas * finding.beta_sd
    assert finding.mass is not None
    assert finding.mass_sd is not None
    assert finding.dingle_k is not None
    assert finding.dingle_sd_k is not None
    assert finding.amplitude_ohm is not None
    assert finding.amplitude_sd_ohm is not None
    assert abs(finding.mass - truth.mass) < sigmas * finding.mass_sd
    assert abs(finding.dingle_k - truth.dingle_k) < sigmas * finding.dingle_sd_k
    assert abs(finding.amplitude_ohm - truth.amplitude_ohm) < sigmas * finding.amplitude_sd_ohm


def test_two_orbits_are_found_blind_and_fitted_within_their_errors() -> None:
    """Frequency, mass, Dingle temperature, amplitude, phase of both; the errors are small."""
    found = analyse_ladder(simulated_ladder(1, FIELD, (0.4, 2.0, 4.0, 6.0), (LIGHT, HEAVY)))
    assert len(found) == 2
    for finding, truth in zip(found, (LIGHT, HEAVY), strict=True):
        assert_within(finding, truth)
        assert finding.frequency_sd_t < 0.02
        assert finding.mass_sd is not None
        assert finding.mass_sd < 0.01 * truth.mass


def test_what_grows_towards_low_field_is_no_orbit() -> None:
    """A negative Dingle temperature: a rest of something else, not an oscillation of the sample."""
    growing = replace(HEAVY, amplitude_ohm=0.02, frequency_t=700.0, dingle_k=-0.6)
    sweeps = simulated_ladder(4, FIELD, (0.4, 2.0, 4.0), (LIGHT, growing))
    assert 700 in [round(one) for one in find_orbits(sweeps)]
    assert [round(one.frequency_t) for one in analyse_ladder(sweeps)] == [410]


def test_weak_orbit_beside_a_strong_one_is_found() -> None:
    """A twentieth of the amplitude, hidden under the strong one's side lobes at first."""
    weak = replace(HEAVY, amplitude_ohm=0.05, frequency_t=475.0)
    found = analyse_ladder(simulated_ladder(2, FIELD, (0.4, 2.0, 4.0), (LIGHT, weak)))
    assert [round(o.frequency_t) for o in found] == [410, 475]


def test_harmonics_are_not_reported_as_orbits() -> None:
    """A strong second and third harmonic stay what they are."""
    rich = replace(LIGHT, harmonics=3, dingle_k=0.3)
    found = find_orbits(simulated_ladder(3, FIELD, (0.4, 1.0), (rich,)))
    assert [round(f) for f in found] == [410]


def test_noise_alone_gives_no_orbit() -> None:
    """Twenty nights of noise; a false alarm each thousand is allowed, so none in twenty."""
    field = fields(6.0, 12.0, 500.0, 1.0)
    for seed in range(20):
        assert find_orbits(simulated_ladder(seed, field, (0.4, 3.0), (), substeps=4)) == []


def test_one_sweep_gives_frequency_but_neither_mass_nor_dingle() -> None:
    """With one temperature they cannot be told apart and are not guessed."""
    found = analyse_ladder(simulated_ladder(4, FIELD, (0.5,), (LIGHT, HEAVY)))
    assert [round(o.frequency_t) for o in found] == [410, 1130]
    for finding, truth in zip(found, (LIGHT, HEAVY), strict=True):
        assert finding.mass is None
        assert finding.dingle_k is None
        assert finding.amplitude_ohm is None
        assert abs(finding.frequency_t - truth.frequency_t) < 6 * finding.frequency_sd_t


def test_two_sweeps_at_two_temperatures_give_both() -> None:
    """The least that tells mass from scattering."""
    found = analyse_ladder(simulated_ladder(5, FIELD, (0.4, 5.0), (LIGHT, HEAVY)))
    for finding, truth in zip(found, (LIGHT, HEAVY), strict=True):
        assert_within(finding, truth)


def test_low_signal_to_noise_is_found_together_but_not_in_a_single_point() -> None:
    """Noise as large as the oscillation at the highest field."""
    found = analyse_ladder(
        simulated_ladder(6, FIELD, (0.4, 1.5, 3.0), (replace(LIGHT, harmonics=1),), noise_ohm=1.0)
    )
    assert [round(o.frequency_t / 10) for o in found] == [41]
    assert 5 < found[0].signal_to_noise < 60


def test_lag_left_in_would_shift_up_against_down_and_does_not() -> None:
    """Rising and falling sweeps agree after the lag correction and disagree without it."""
    sweeps = simulated_ladder(7, FIELD, (0.4, 0.4, 2.0, 2.0), (LIGHT,), time_constant_s=1.0)
    both = analyse_directions(sweeps, [410.0])
    up, down = both[1][0], both[-1][0]
    spread = np.hypot(up.frequency_sd_t, down.frequency_sd_t)
    assert abs(up.frequency_t - down.frequency_t) < 4 * spread
    assert abs(up.beta - down.beta) < 4 * np.hypot(up.beta_sd, down.beta_sd)
    wrong = [replace(s, time_constant_s=0.0) for s in sweeps]
    both = analyse_directions(wrong, [410.0])
    up, down = both[1][0], both[-1][0]
    assert abs(up.beta - down.beta) > 10 * np.hypot(up.beta_sd, down.beta_sd)


def test_filter_loss_is_put_back_into_the_amplitude() -> None:
    """A slow filter takes a quarter of the heavy orbit, and the fit puts it back."""
    sweeps = simulated_ladder(8, FIELD, (0.4, 3.0, 5.0), (HEAVY,), time_constant_s=0.6)
    assert abs(sweeps[0].lag_corrected().response(1130.0)[100]) < 0.75
    (finding,) = analyse_ladder(sweeps)
    assert_within(finding, HEAVY)


def test_known_frequency_makes_a_weaker_orbit_seen_but_invents_none() -> None:
    """A prior 10 percent wrong is good enough, and noise stays noise."""
    field = fields(6.0, 12.0, 500.0, 1.0)
    weak = replace(LIGHT, harmonics=1, amplitude_ohm=0.34)
    blind = told = 0
    for seed in range(30):
        sweeps = simulated_ladder(seed, field, (0.4, 2.0), (weak,), noise_ohm=0.6, substeps=4)
        blind += any(abs(f - 410) < 8 for f in find_orbits(sweeps))
        told += any(abs(f - 410) < 8 for f in find_orbits(sweeps, known=[450.0]))
    assert told > blind
    empty = simulated_ladder(9, field, (0.4, 2.0), (), substeps=4)
    assert find_orbits(empty, known=[450.0]) == []


def test_known_orbit_at_a_harmonic_is_reported() -> None:
    """An orbit at twice another's frequency is told from a harmonic only by being expected."""
    twice = TrueOrbit(820.0, 0.3, 0.5, 0.5, 0.25, harmonics=1)
    sweeps = simulated_ladder(10, FIELD, (0.4, 2.0), (replace(LIGHT, harmonics=1), twice))
    assert [round(f) for f in find_orbits(sweeps)] == [410]
    assert [round(f) for f in find_orbits(sweeps, known=[410.0, 820.0])] == [410, 820]


def test_spikes_hardly_move_the_result() -> None:
    """Ten glitches of 50 ohm in a sweep are left out."""
    sweeps = simulated_ladder(11, FIELD, (0.4, 2.0, 4.0), (LIGHT,))
    random = np.random.default_rng(0)
    spiked = []
    for sweep in sweeps:
        values = sweep.resistance_ohm.copy()
        values[random.integers(50, values.size - 50, 10)] += 50.0
        spiked.append(replace(sweep, resistance_ohm=values))
    (finding,) = analyse_ladder(spiked)
    assert_within(finding, LIGHT)


def test_uniform_sweep_from_zero_field_and_rest_at_both_ends() -> None:
    """The field rests, then rises evenly from 0; no filter known, as in a table."""
    field = np.concatenate([np.zeros(60), np.linspace(0, 12, 3000), np.full(60, 12.0)])
    random = np.random.default_rng(12)
    low = TrueOrbit(55.0, 0.06, 3.0, 1.0, 0.3, harmonics=1)
    sweeps = []
    for temperature in (0.5, 8.0, 20.0):
        shape = np.maximum(field, 0.05)
        sweep = simulated_sweep(random, shape, temperature, (low,), time_constant_s=0.0)
        sweeps.append(replace(sweep, field_t=field))
    found = analyse_ladder(sweeps)
    assert len(found) == 1
    assert_within(found[0], low)


def test_analysis_is_fast_enough_to_run_beside_the_night() -> None:
    """3 x 1500 points within 2 s here (0.5 s on a quiet core)."""
    sweeps = simulated_ladder(13, fields(5.0, 12.0, 1130.0, 1.0)[:1500], (0.4, 2.0, 4.0), (LIGHT,))
    begin = time.process_time()
    assert len(analyse_ladder(sweeps)) == 1
    assert time.process_time() - begin < 2.0


def _with(sweep: Sweep, column: str, value: float) -> Sweep:
    values = getattr(sweep, column).copy()
    values[17] = value
    return replace(sweep, **{column: values})


def test_bad_input_is_refused_in_plain_words() -> None:
    """Each message names the sweep, the value and what is allowed."""
    good = simulated_ladder(14, fields(6.0, 12.0, 500.0, 1.0), (1.5,), (), substeps=4)[0]
    with pytest.raises(AnalysisError, match=r"resistance_ohm is nan at point 18 \(1 such points\)"):
        analyse_ladder([_with(good, "resistance_ohm", np.nan)])
    with pytest.raises(
        AnalysisError, match=r'sweep "1\.5 K": temperature_k is -1 K, allowed: above'
    ):
        analyse_ladder([_with(good, "temperature_k", -1.0)])
    with pytest.raises(AnalysisError, match="time_s does not rise"):
        analyse_ladder([_with(good, "time_s", 0.0)])
    short = {
        name: getattr(good, name)[:20]
        for name in ("time_s", "field_t", "temperature_k", "resistance_ohm")
    }
    with pytest.raises(AnalysisError, match="20 points, allowed: 40 or more"):
        analyse_ladder([replace(good, **short)])
    with pytest.raises(AnalysisError, match="the field stays at 5 T, allowed: a field that moves"):
        analyse_ladder([replace(good, field_t=np.full(good.time_s.size, 5.0))])
    with pytest.raises(AnalysisError, match="field_t has 5 values"):
        analyse_ladder([replace(good, field_t=np.ones(5))])
    with pytest.raises(AnalysisError, match="no sweep to analyse"):
        analyse_ladder([])
    with pytest.raises(AnalysisError, match=r"frequency: -3\.0 T, allowed: above 0 T"):
        fit_ladder([good], [-3.0])
    with pytest.raises(AnalysisError, match="the resistance is 0 throughout"):
        analyse_ladder([replace(good, resistance_ohm=np.zeros(good.time_s.size))])
    assert fit_ladder([good], []) == []
