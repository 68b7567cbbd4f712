"""Coil, cryostat, sample, helium and lock-ins, coupled, and brought up to date when looked at."""

from bisect import bisect_left
from collections.abc import Callable
from dataclasses import dataclass, field

from simulators.coil import Coil, CoilParameters
from simulators.cryostat import Stage, StageParameters
from simulators.gas_sample import GasSample
from simulators.helium import HeliumBath, HeliumParameters
from simulators.interference import Interference, Knocks
from simulators.lockin import LockIn, LockInParameters
from simulators.lockin_parameters import Surroundings
from simulators.lowpass import NODES_PER_PIECE
from simulators.noise import NoiseSource, johnson_v2_per_hz
from simulators.sample import FIELD_MIN_T, Sample, SampleParameters

_SEGMENT_MAX_S = 20.0
_PHASE_PER_PIECE = 0.75
_PIECES = (1, 2, 3, 4, 6, 8, 12, 16, 24, 32, 48, 64)  # few numbers, so that matrices are kept
_STEP_MIN_S = 1e-4
_UNSEEN = 1e-5  # of the zero-field resistance, behind the filter
_EVENTS_AT_ONCE_MAX = 100


@dataclass(frozen=True, slots=True)
class GaugeParameters:
    """A gauge of the helium level, percent."""

    name: str = "helium"
    noise_percent: float = 0.02


@dataclass(frozen=True, slots=True)
class WorldParameters:
    """Everything that a simulated rig is made of; SI units."""

    seed: int = 1
    coil: CoilParameters = field(default_factory=CoilParameters)
    stage: StageParameters = field(default_factory=StageParameters)
    sample: SampleParameters = field(default_factory=SampleParameters)
    helium: HeliumParameters = field(default_factory=HeliumParameters)
    lock_ins: tuple[LockInParameters, ...] = ()
    gauges: tuple[GaugeParameters, ...] = ()
    surroundings: Surroundings = field(default_factory=Surroundings)


class World:
    """The simulated rig's physics.

    Parameters
    ----------
    parameters : WorldParameters
        What it is made of.
    now : callable
        Time in seconds, never running backwards. Nothing moves between two calls of `advance`;
        `advance` integrates from the last call's time to this one's, whatever lies between.
    """

    def __init__(self, parameters: WorldParameters, now: Callable[[], float]) -> None:
        self.parameters = parameters
        self._now = now
        self._time_s = now()
        self.coil = Coil(parameters.coil, self.noise("magnet/quench").take)
        self.stage = Stage(parameters.stage, self._excitation_w)
        gas = parameters.sample.gas
        self.sample = GasSample(parameters.sample) if gas else Sample(parameters.sample)
        self.helium = HeliumBath(parameters.helium)
        self.lock_ins = {p.name: self._lock_in(p) for p in parameters.lock_ins}
        self.gauges = {p.name: p for p in parameters.gauges}
        self._oscillating = [
            lock_in
            for lock_in in self.lock_ins.values()
            if gas or lock_in.parameters.measures == "longitudinal"
        ]
        self._quiet_s = parameters.stage.response_s / 3.0

    def _lock_in(self, p: LockInParameters) -> LockIn:
        surroundings = self.parameters.surroundings
        knocks = None
        if surroundings.knocks_per_h and (p.knock_v_s or p.knock_step_v):
            # One stream of instants for all: a knock reaches every lock-in at once.
            instants, phases = self.noise("knocks"), self.noise(f"{p.name}/knock")
            knocks = Knocks(surroundings.knocks_per_h, self._time_s, instants, phases)
        interference = Interference(p, lambda: self._time_s, surroundings, knocks)
        return LockIn(p, self.noise(p.name), interference, self._johnson_v2_per_hz)

    def _johnson_v2_per_hz(self) -> float:
        """Density of the sample's own noise: of its resistance along, for either voltage."""
        ohm = self.sample.background_ohm(self.coil.sample_t)
        return johnson_v2_per_hz(ohm, self.stage.sample_k)

    def noise(self, name: str) -> NoiseSource:
        """The random stream of one instrument."""
        return NoiseSource(self.parameters.seed, name)

    # -- the truth, for tests and for people who want to compare ---------------------------------

    @property
    def field_t(self) -> float:
        """Field at the sample."""
        self.advance()
        return self.coil.sample_t

    @property
    def coil_current_a(self) -> float:
        """Current in the coil."""
        self.advance()
        return self.coil.coil_t / self.coil.parameters.coil_constant_t_per_a

    @property
    def sample_k(self) -> float:
        """Temperature of the sample."""
        self.advance()
        return self.stage.sample_k

    @property
    def helium_boiled_l(self) -> float:
        """Litres boiled since the start."""
        self.advance()
        return self.helium.boiled_l

    def quench(self) -> None:
        """Make the coil quench now."""
        self.advance()
        self.coil.quench()

    # -- time --------------------------------------------------------------------------------------

    def advance(self) -> None:
        """Integrate to now; costs next to nothing when no time has passed."""
        now = self._now()
        at_once = 0
        while now > self._time_s:
            if self.coil.settle():
                self.coil.quench()
            left = now - self._time_s
            step = min(left, _SEGMENT_MAX_S, self.coil.horizon_s(), self.stage.horizon_s())
            pieces, oscillates = self._plan(step)
            while pieces > _PIECES[-1] and step > _STEP_MIN_S:
                step *= 0.5
                pieces, oscillates = self._plan(step)
            if step <= 0.0 or self._time_s + step == self._time_s:
                # Two events at one instant; more than a few would be an endless loop.
                at_once += 1
                if at_once > _EVENTS_AT_ONCE_MAX:
                    raise RuntimeError(f"the world stands still at {self._time_s} s")
                step = max(step, 1e-9)
            else:
                at_once = 0
            self._segment(step, min(pieces, _PIECES[-1]), oscillates)
            self._time_s = now if step >= left else self._time_s + step
        if self.coil.settle():
            self.coil.quench()

    def _segment(self, duration_s: float, pieces: int, oscillates: bool) -> None:
        """Move everything through a time without events."""
        coil, stage = self.coil, self.stage
        velocity = coil.coil_velocity_t_per_s
        nodes = NODES_PER_PIECE * pieces
        start_k, start_slope = stage.sample_k, stage.sample_slope_k_per_s
        before_t = coil.coil_t
        spent = coil.account.bath_j()
        fields = coil.advance(duration_s, nodes)
        if coil.quenched or coil.is_bent:
            velocity = (coil.coil_t - before_t) / duration_s
        stage.advance(duration_s, velocity, before_t)
        self.helium.advance(duration_s, 0.0 if coil.quenched else velocity, coil.heater)
        self.helium.absorb(self._coil_heat_j(duration_s, spent))
        if not coil.quenched and self.helium.litres == 0.0 and coil.coil_t != 0.0:
            coil.quench()
        if self.lock_ins:
            end = (stage.sample_k, stage.sample_slope_k_per_s)
            self._measure(duration_s, fields, (start_k, start_slope), end, oscillates)

    def _coil_heat_j(self, duration_s: float, before: tuple[float, float]) -> float:
        """Heat that the bath has taken from the magnet in a time."""
        direct_j, quench_j = self.coil.account.bath_j()
        heat = self.coil.heat
        given_j, let_in_j = heat.advance(duration_s, self.helium.percent)
        self.coil.account.bare_j += let_in_j
        at_once_j = heat.absorb(quench_j - before[1]) if quench_j != before[1] else 0.0
        return direct_j - before[0] + given_j + at_once_j

    def _excitation_w(self, field_t: float) -> float:
        """Power that the lock-ins' currents leave in the sample, its oscillations left out."""
        square = 0.0
        for lock_in in self.lock_ins.values():
            square += lock_in.current_a**2
        return square * self.sample.background_ohm(field_t)

    def _plan(self, duration_s: float) -> tuple[int, bool]:
        """How many cubics follow the signal, and whether the oscillations are worth following.

        The number comes from the oscillation's phase and from the temperature's response.
        """
        pieces = 1 + int(duration_s / self._quiet_s)
        path = self._path_t(duration_s)
        oscillates = self._sees_oscillations(duration_s, path)
        if path and oscillates:
            here = abs(self.coil.sample_t)
            nearest = max(here - path, FIELD_MIN_T)
            phase = self.sample.phase_t * path / (nearest * max(here, nearest))
            pieces = max(pieces, 1 + int(phase / _PHASE_PER_PIECE))
        if pieces <= _PIECES[-1]:
            pieces = _PIECES[bisect_left(_PIECES, pieces)]
        return pieces, oscillates

    def _path_t(self, duration_s: float) -> float:
        """Field through which the sample passes, at most."""
        coil = self.coil
        lag_s = coil.parameters.field_lag_s
        path = abs(coil.coil_velocity_t_per_s) * duration_s
        if lag_s <= 0.0:
            return path
        return (path + abs(coil.coil_t - coil.sample_t)) * min(1.0, duration_s / lag_s)

    def _sees_oscillations(self, duration_s: float, path_t: float) -> bool:
        """Whether a lock-in could see them: A / (omega tau) against what cannot be seen.

        Near zero field they are damped to nothing and pass at any frequency; to follow them there
        would cost much and show nothing.
        """
        if not self._oscillating:
            return False
        farthest = abs(self.coil.sample_t) + path_t
        if not path_t or farthest > self.sample.clear_t:
            return True
        if farthest <= FIELD_MIN_T:
            return False
        omega = self.sample.slowest_t * path_t / duration_s / farthest**2
        bound = self.sample.oscillation_bound(farthest)
        return any(
            bound > _UNSEEN * max(1.0, omega * lock_in.time_constant_s)
            for lock_in in self._oscillating
        )

    def _measure(
        self,
        duration_s: float,
        fields: list[float],
        start: tuple[float, float],
        end: tuple[float, float],
        oscillates: bool,
    ) -> None:
        nodes = len(fields) - 1
        (t0, d0), (t1, d1) = start, end
        # Cubic through both ends' temperatures and slopes.
        d0, d1 = d0 * duration_s, d1 * duration_s
        c2, c3 = 3 * (t1 - t0) - 2 * d0 - d1, 2 * (t0 - t1) + d0 + d1
        moving = fields[0] != fields[-1]
        rates = None
        if moving and any(p.pickup_v_s_per_t for p in self.parameters.lock_ins):
            rates = _slopes(fields, duration_s)
        sample = self.sample
        kelvins: list[float] = []
        if oscillates:
            parts = (i / nodes for i in range(nodes + 1))
            kelvins = [t0 + s * (d0 + s * (c2 + s * c3)) for s in parts]
        along: list[float] | None = None
        across: list[float] | None = None
        for lock_in in self.lock_ins.values():
            if lock_in.parameters.measures == "hall":
                if across is None and oscillates:
                    across = sample.hall_ohms(fields, kelvins)
                elif across is None:
                    across = [sample.smooth_hall_ohm(b) for b in fields]
                ohms = across
            else:
                if along is None and oscillates:
                    along = sample.longitudinal_ohms(fields, kelvins)
                elif along is None:
                    along = [sample.background_ohm(b) for b in fields]
                ohms = along
            lock_in.advance(duration_s, ohms, rates)


def _slopes(values: list[float], duration_s: float) -> list[float]:
    """Derivative at each node, by second-order differences."""
    step = duration_s / (len(values) - 1)
    inner = [(values[i + 1] - values[i - 1]) / (2 * step) for i in range(1, len(values) - 1)]
    first = (-3 * values[0] + 4 * values[1] - values[2]) / (2 * step)
    last = (3 * values[-1] - 4 * values[-2] + values[-3]) / (2 * step)
    return [first, *inner, last]
