"""The lock-in through changes of its settings, and what interferes; any order is survived."""

import cmath
import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from simulators.interference import Interference, Knocks
from simulators.lockin import LockIn
from simulators.lockin_panel import LockInPanel
from simulators.lockin_parameters import LockInParameters, Surroundings
from simulators.noise import NoiseSource
from simulators.world import World, WorldParameters
from tests.simulators.rigs import Clock, quiet

DISTURBED = {
    "noise_corner_hz": 30.0,
    "johnson_noise": True,
    "wiring_phase_rad": 0.2,
    "coupling_per_hz": 2e-8,
    "third_harmonic": 0.01,
    "mains_v": (3e-6, 0.0, 1e-6),
    "mains_phase_rad": 1.0,
    "knock_v_s": 1e-6,
    "knock_step_v": 2e-6,
    "full_scales_v": (1e-6, 3e-6, 1e-5, 3e-5, 1e-4, 3e-4, 1e-3, 3e-3),
    "input_range_v": 1e-3,
}


def disturbed() -> WorldParameters:
    """The quiet rig, with everything that interferes with a lock-in."""
    p = quiet()
    first, second = p.lock_ins
    return replace(
        p,
        lock_ins=(
            replace(first, noise_v_per_rthz=5e-9, pickup_v_s_per_t=1e-3, **DISTURBED),  # type: ignore[arg-type]
            replace(second, noise_v_per_rthz=5e-9, **DISTURBED),  # type: ignore[arg-type]
        ),
        surroundings=Surroundings(mains_hz=50.0, knocks_per_h=200.0),
    )


@pytest.mark.parametrize("seed", range(2))
def test_output_through_changes_of_every_setting_is_that_of_an_integrator(seed: int) -> None:
    """tau dz_k/dt = z_(k-1) - z_k, integrated by scipy between orders and knocks: 1e-9."""
    p = replace(
        quiet().lock_ins[0], frequency_hz=49.3, wiring_phase_rad=0.2, coupling_per_hz=2e-8,
        third_harmonic=0.05, mains_v=(3e-5, 0.0, 1e-5), mains_phase_rad=1.0,
        knock_v_s=1e-5, knock_step_v=2e-5,
    )  # fmt: skip
    clock = Clock(5.0)
    sources = NoiseSource(seed, "k"), NoiseSource(seed, "p")
    knocks, twin = (
        Knocks(3600.0, 5.0, *s) for s in (sources, (NoiseSource(seed, "k"), NoiseSource(seed, "p")))
    )
    lock_in = LockIn(p, NoiseSource(1, "a"), Interference(p, clock, knocks=knocks))
    random = np.random.default_rng(seed)
    state, level = np.zeros(4, dtype=complex), 0j

    def mixed(time_s: float) -> complex:
        n, f, volts = lock_in.harmonic, lock_in.frequency_hz, lock_in.amplitude_v
        share = 0.05 * volts**2
        sample = 1e-4 * volts * {1: 1 + 3 * share, 3: share}.get(n, 0.0)
        value = sample * cmath.exp(0.2j * n) + level
        value += 2e-8j * f * volts if n == 1 else 0.0
        for k, mains_v in ((1, 3e-5), (3, 1e-5)):
            turns = (50.0 * k - n * f) * (time_s - 5.0)
            value += mains_v * cmath.exp(1j * (2 * math.pi * turns + k))
        return value * cmath.exp(-1j * lock_in.phase_rad)

    def integrate(state: np.ndarray, start_s: float, end_s: float) -> np.ndarray:  # type: ignore[type-arg]
        def slope(t: float, z: np.ndarray) -> np.ndarray:  # type: ignore[type-arg]
            before = np.concatenate(([mixed(t)], z[:-1]))
            return (before - z) / lock_in.time_constant_s

        solved = solve_ivp(slope, (start_s, end_s), state, "DOP853", rtol=1e-11, atol=1e-18)
        return np.asarray(solved.y[:, -1])

    orders = [
        lambda: lock_in.set_phase(0.7), lambda: lock_in.set_frequency(50.4),
        lambda: lock_in.set_time_constant(0.12), lambda: lock_in.set_harmonic(3),
        lambda: lock_in.set_order(2), lambda: lock_in.set_amplitude(0.6),
        lambda: lock_in.set_harmonic(1), lambda: lock_in.set_order(4),
        lambda: lock_in.set_frequency(49.6), lambda: lock_in.set_phase(-2.0),
        lambda: lock_in.set_time_constant(0.5), lambda: lock_in.set_harmonic(2),
    ]  # fmt: skip
    random.shuffle(orders)
    for order in orders:
        end_s = clock.time_s + random.uniform(0.05, 0.8)
        lock_in.advance(end_s - clock.time_s, [100.0] * 4, None)
        while twin.next_s < end_s:
            at_s = twin.next_s
            state = integrate(state, clock.time_s, at_s)
            phase = twin.take()
            turn = cmath.exp(-1j * lock_in.phase_rad)
            state[0] += 1e-5 * phase * turn / lock_in.time_constant_s
            level, clock.time_s = 2e-5 * phase, at_s
        state = integrate(state, clock.time_s, end_s)
        clock.time_s = end_s
        assert lock_in.clean_v() == pytest.approx(complex(state[-1]), abs=1e-13)
        order()
        kept = [state[min(k, len(state) - 1)] for k in range(lock_in.order)]
        state = np.array(kept)
    assert knocks.count > 0


def test_who_looks_does_not_change_the_interference() -> None:
    seen = []
    for looks in (1, 7, 400):
        clock = Clock()
        world = World(disturbed(), clock)
        for i in range(1, looks + 1):
            clock.time_s = 200.0 * i / looks
            world.advance()
            world.lock_ins["xx"].output_v()
        seen.append([lock_in.clean_v() for lock_in in world.lock_ins.values()])
    for other in seen[1:]:
        assert other == pytest.approx(seen[0], abs=1e-12)


def test_same_seed_and_looks_give_the_same_readings() -> None:
    runs = []
    for _ in range(2):
        clock = Clock()
        panel = LockInPanel(World(disturbed(), clock), "xx")
        runs.append([])
        for i in range(50):
            clock.time_s = 3.0 * i
            runs[-1].append(panel.execute("MEAS:XY?;:STAT:QUES:COND?"))
    assert runs[0] == runs[1]
    assert len(set(runs[0])) > 40


def test_a_knock_reaches_both_lock_ins_at_once() -> None:
    world = World(disturbed(), Clock())
    first, second = (lock_in._interference.knocks for lock_in in world.lock_ins.values())
    assert first is not None
    assert second is not None
    for _ in range(20):
        assert first.next_s == second.next_s
        assert first.take() != second.take()


def test_phase_turns_x_into_y_through_the_filter() -> None:
    """At once nothing moves; after 30 time constants X + iY is turned by minus the phase."""
    clock = Clock()
    world = World(quiet(), clock)
    panel = LockInPanel(world, "xx")
    clock.time_s = 60.0
    before = panel.execute("MEAS:XY?")
    panel.execute("SENS:PHAS 30 DEG")
    assert panel.execute("MEAS:XY?") == before
    clock.time_s = 69.0
    world.advance()
    wanted = 1e-4 * cmath.exp(-1j * math.pi / 6)
    assert world.lock_ins["xx"].clean_v() == pytest.approx(wanted, rel=1e-8)
    assert panel.execute("SENS:PHAS?;HARM?;*RST;:SENS:PHAS?") == (
        "5.235987756E-01;1;0.000000000E+00"
    )


def test_ranges_snap_up_and_refuse_what_none_of_them_holds() -> None:
    p = quiet()
    ranged = replace(p.lock_ins[0], full_scales_v=(1e-5, 3e-5, 1e-4, 3e-4))
    panel = LockInPanel(World(replace(p, lock_ins=(ranged,)), Clock()), "xx")
    for asked, taken in (("300 UV", 3e-4), ("30.1 UV", 1e-4), ("10 UV", 1e-5), ("MAX", 3e-4)):
        panel.execute(f"SENS:VOLT:RANG {asked}")
        assert float(panel.execute("SENS:VOLT:RANG?") or "") == pytest.approx(taken)
        assert panel.execute("SYST:ERR?") == '0,"No error"'
    for asked in ("301 UV", "9 UV"):
        panel.execute(f"SENS:VOLT:RANG {asked}")
        assert (panel.execute("SYST:ERR?") or "").startswith("-222")
    assert panel.execute("SENS:VOLT:RANG:CAT?") == (
        "1.000000000E-05,3.000000000E-05,1.000000000E-04,3.000000000E-04"
    )


@pytest.mark.parametrize(("listed", "taken"), [((), 2e-4), ((1e-5, 3e-4, 1e-3), 3e-4)])
def test_automatic_ranging_holds_the_output_with_headroom(
    listed: tuple[float, ...], taken: float
) -> None:
    """100 uV: 125 uV are wanted, that is 200 uV of 1-2-5, or the range of the list."""
    p = quiet()
    ranged = replace(p.lock_ins[0], full_scales_v=listed, full_scale_v=1e-5)
    clock = Clock()
    panel = LockInPanel(World(replace(p, lock_ins=(ranged,)), clock), "xx")
    clock.time_s = 60.0
    assert panel.execute("STAT:QUES:COND?") == "1"
    panel.execute("SENS:VOLT:RANG:AUTO ONCE")
    assert float(panel.execute("SENS:VOLT:RANG?") or "") == pytest.approx(taken)
    assert panel.execute("STAT:QUES:COND?;:SENS:VOLT:RANG:AUTO?;:SYST:ERR?") == '0;0;0,"No error"'
    panel.execute("SENS:VOLT:RANG:AUTO OFF;AUTO ON;AUTO TWICE")
    assert (panel.execute("SYST:ERR?") or "").startswith("-224")
    assert (panel.execute("SYST:ERR?") or "").startswith("-141")


def test_detection_stays_within_the_frequencies_of_the_instrument() -> None:
    panel = LockInPanel(World(quiet(), Clock()), "xx")
    panel.execute("SOUR:FREQ 40 KHZ;:SENS:HARM 3")
    assert (panel.execute("SYST:ERR?") or "").startswith("-222")
    panel.execute("SENS:HARM 2;:SOUR:FREQ 60 KHZ")
    assert (panel.execute("SYST:ERR?") or "").startswith("-222")
    assert panel.execute("SENS:HARM?;:SOUR:FREQ?") == "2;4.000000000E+04"


def test_mains_overloads_the_input_while_the_output_is_small() -> None:
    """100 uV of the sample and 200 uV of the line: a peak of sqrt(2) 300 uV = 424.3 uV."""
    p = quiet()
    for input_range_v, status in ((4.24e-4, "513"), (4.25e-4, "0")):
        humming = replace(p.lock_ins[0], mains_v=(2e-4,), input_range_v=input_range_v)
        clock = Clock()
        world = World(replace(p, lock_ins=(humming,)), clock)
        panel = LockInPanel(world, "xx")
        clock.time_s = 60.0
        assert panel.execute("STAT:QUES:COND?") == status
        assert not world.lock_ins["xx"].overload
        assert world.lock_ins["xx"].input_peak_v == pytest.approx(4.2426e-4, rel=1e-4)
    assert panel.execute("INP:RANG?") == "4.250000000E-04"


def test_peak_of_the_input_is_the_sum_of_the_peaks_of_all_that_comes_in() -> None:
    """The first harmonic is 1.06 R I + pickup, at 0.3 rad, with the coupling in quadrature."""
    p = LockInParameters(
        "a", wiring_phase_rad=0.3, coupling_per_hz=3e-7, third_harmonic=0.02, frequency_hz=100.0,
        mains_v=(2e-5, 1e-5), knock_step_v=4e-5, pickup_v_s_per_t=1e-3,
    )  # fmt: skip
    clock = Clock()
    knocks = Knocks(1.0, 0.0, NoiseSource(1, "k"), NoiseSource(1, "p"))
    lock_in = LockIn(p, NoiseSource(1, "a"), Interference(p, clock, knocks=knocks))
    lock_in.advance(1.0, [100.0] * 4, [0.02] * 4)
    first = abs((1.06e-4 + 2e-5) * cmath.exp(0.3j) + 3e-5j)
    rest = 0.02e-4 + 2e-5 + 1e-5
    assert lock_in.input_peak_v == pytest.approx(math.sqrt(2) * (first + rest), rel=1e-12)
    clock.time_s = knocks.next_s
    wanted_v = math.sqrt(2) * (first + rest + 4e-5)
    assert lock_in.input_peak_v == pytest.approx(wanted_v, rel=1e-12)


def test_noise_in_the_filter_keeps_its_volts_when_its_density_changes() -> None:
    """From 10 Hz to 10 kHz with a corner of 1 kHz, a hundredth of a time constant later."""
    p = LockInParameters("a", noise_corner_hz=1e3, frequency_hz=10.0, order=4)
    lock_in = LockIn(p, NoiseSource(1, "a"))
    lock_in.advance(10.0, [0.0] * 4, None)
    before = complex(*lock_in.output_v())
    lock_in.set_frequency(1e4)
    assert complex(*lock_in.output_v()) == pytest.approx(before, rel=1e-12, abs=0)
    lock_in.advance(0.003, [0.0] * 4, None)
    assert complex(*lock_in.output_v()) == pytest.approx(before, rel=0.05, abs=0)


ORDERS = st.one_of(
    st.tuples(st.just("SENS:FILT:TCON"), st.floats(1e-4, 1e3)),
    st.tuples(st.just("SENS:FILT:ORD"), st.integers(1, 4)),
    st.tuples(st.just("SENS:VOLT:RANG"), st.floats(1e-9, 10.0)),
    st.tuples(st.just("SENS:VOLT:RANG:AUTO"), st.just("ONCE")),
    st.tuples(st.just("SOUR:VOLT:AMPL"), st.floats(0.0, 10.0)),
    st.tuples(st.just("SOUR:FREQ"), st.floats(1e-3, 1e5)),
    st.tuples(st.just("SENS:HARM"), st.integers(1, 99)),
    st.tuples(st.just("SENS:PHAS"), st.floats(-6.28, 6.28)),
    st.tuples(st.just("*RST"), st.just("")),
)


@given(
    orders=st.lists(st.tuples(ORDERS, st.floats(0.0, 100.0)), min_size=1, max_size=8),
    seed=st.integers(0, 2**32),
)
@settings(max_examples=60, deadline=None)
def test_any_settings_give_finite_outputs_and_overload_where_beyond(
    orders: list[tuple[tuple[str, object], float]], seed: int
) -> None:
    clock = Clock()
    world = World(replace(disturbed(), seed=seed), clock)
    panel, lock_in = LockInPanel(world, "xx"), world.lock_ins["xx"]
    for (header, value), wait_s in orders:
        panel.execute(f"{header} {value}")
        clock.time_s += wait_s
        x, y = (float(part) for part in (panel.execute("MEAS:XY?") or "").split(","))
        status = int(panel.execute("STAT:QUES:COND?") or "")
        full = lock_in.full_scale_v
        assert math.isfinite(x)
        assert abs(x) <= full
        assert math.isfinite(y)
        assert abs(y) <= full
        beyond = max(abs(v) for v in lock_in.output_v()) > full
        assert beyond == lock_in.overload
        # Far from the limit, the sample's voltage alone decides.
        current_a = lock_in.amplitude_v * 1e-6
        input_peak_v = math.sqrt(2) * 100.0 * current_a * (1 + 0.04 * (current_a / 1e-6) ** 2)
        if input_peak_v > 1.2e-3:
            assert status == 513
        elif input_peak_v < 0.8e-3 and lock_in.frequency_hz * lock_in.amplitude_v < 1e3:
            assert status == int(beyond)
    while (error := panel.execute("SYST:ERR?") or "") != '0,"No error"':
        assert error.startswith("-222")  # frequency times harmonic, or range, and nothing else


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"noise_corner_hz": -1.0}, r"noise_corner_hz of lock-in a is -1; allowed is 0 to inf"),
        ({"mains_v": (1.0, -1e-6)}, r"mains_v of lock-in a is -1e-06; allowed is 0 to inf"),
        ({"third_harmonic": math.nan}, r"third_harmonic of lock-in a is nan; .* -0\.3 to 0\.3"),
        ({"third_harmonic_at_a": 0.0}, r"third_harmonic_at_a .* is 0; allowed is above 0 to inf"),
        ({"full_scales_v": (1e-3, 1e-3)}, r"full_scales_v of lock-in a is .*; allowed is rising"),
        ({"full_scales_v": (100.0,)}, r"full_scales_v of lock-in a is 100; allowed is 1e-09 to 10"),
        ({"input_range_v": 0.0}, r"input_range_v of lock-in a is 0; allowed is above 0"),
    ],
)
def test_impossible_parameters_are_refused(changes: dict[str, object], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        LockInParameters("a", **changes)  # type: ignore[arg-type]
