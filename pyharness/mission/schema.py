"""The keys of a mission file: the one place for type, unit, legal range, default and meaning.

Ranges are wider than common practice, and narrow enough to catch a wrong unit. What relates keys to each
other is in `checks`, what chooses between alternative keys in `defaults`.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from datetime import UTC, datetime
from typing import Literal

from pyharness.mission.model import AXES
from pyharness.mission.wording import quantity, shown

Bound = float | int | datetime


@dataclass(frozen=True)
class Range:
    """A legal range; either end may be open. NaN is in no range."""

    low: Bound
    high: Bound
    low_open: bool = False
    high_open: bool = False

    def __contains__(self, value: Bound) -> bool:
        above = value > self.low if self.low_open else value >= self.low
        below = value < self.high if self.high_open else value <= self.high
        return above and below

    def __str__(self) -> str:
        left, right = "(" if self.low_open else "[", ")" if self.high_open else "]"
        return f"{left}{shown(self.low)}, {shown(self.high)}{right}"


@dataclass(frozen=True)
class Required:
    """The key has no default."""

    def __str__(self) -> str:
        return "required"


@dataclass(frozen=True)
class Depends:
    """What an absent key means depends on other keys, as the text says."""

    text: str

    def __str__(self) -> str:
        return self.text


Kind = Literal["number", "integer", "text", "flag", "time"]

_NOUNS: dict[Kind, tuple[str, str]] = {
    "number": ("a number", "numbers"),
    "integer": ("an integer", "integers"),
    "text": ("a text", "texts"),
    "flag": ("true or false", "flags"),
    "time": ("a date-time with Z or an offset", "date-times"),
}


@dataclass(frozen=True)
class Key:
    """One key of the mission file.

    `path` is dotted, with `*` for each axis; `shape` is that of the array, () for a single value; `limits`
    apply to every element, for a text to its length; `meaning` says in one line how to choose the value.
    """

    path: str
    kind: Kind
    unit: str
    meaning: str
    limits: Range | None = None
    choices: tuple[str | int, ...] = ()
    shape: tuple[int, ...] = ()
    default: object = Required()

    @property
    def name(self) -> str:
        """The key's own name, without its table."""
        return self.path.rpartition(".")[2]

    @property
    def required(self) -> bool:
        """Whether the key must be given, whatever the others say."""
        return isinstance(self.default, Required)

    @property
    def default_text(self) -> str:
        """The default as it is told to users."""
        if isinstance(self.default, (Required, Depends)):
            return str(self.default)
        if isinstance(self.default, tuple):
            return f"[{', '.join(map(shown, self.default))}] {self.unit}"
        return quantity(self.default, self.unit)

    @property
    def legal(self) -> str:
        """The legal values without the unit: a range or a choice."""
        if self.choices:
            return " or ".join(shown(choice) for choice in self.choices)
        return f"in {self.limits}" if self.limits else ""

    def expected(self, shape: tuple[int, ...] | None = None) -> str:
        """What the key, or the part of it that has this shape, must be."""
        shape = self.shape if shape is None else shape
        if self.choices:
            return self.legal
        one, many = _NOUNS[self.kind]
        if not shape:
            return " ".join(part for part in (one, self.legal, self.unit) if part)
        size = " × ".join(str(n) for n in shape)
        each = f", each {self.legal} {self.unit}".rstrip() if self.limits else ""
        return f"{size} {many}{each}"


def _between(low: Bound, high: Bound) -> Range:
    return Range(low, high)


def _positive(high: float) -> Range:
    return Range(0, high, low_open=True)


def _duration_ms(high: float) -> Range:
    return Range(0.001, high)  # the controller counts whole µs


def _within(size: float) -> Range:
    return Range(-size, size)


def _new_year(year: int) -> datetime:
    return datetime(year, 1, 1, tzinfo=UTC)


_ZERO = (0.0, 0.0, 0.0)
_XYZ = (3,)
_OR_ELEMENTS = Depends("required, unless two_line_elements is given")
_OR_DIPOLE = Depends("with the other four winding keys, unless dipole_a_m2 is given")
_ONE_GAIN = Depends("exactly one of k_am2_s_per_t, K_n_m_s and gain is required")

_BODY = (
    *(
        Key(f"body.inertia_kg_m2.{entry}", "number", "kg m²",
            f"Entry {entry} of the inertia tensor about the centre of mass, from the mass model.",
            _between(1e-5, 1e3))
        for entry in ("xx", "yy", "zz")
    ),
    *(
        Key(f"body.inertia_kg_m2.{entry}", "number", "kg m²",
            f"Entry {entry} of the inertia tensor as it stands there: minus the integral of the product.",
            _within(1e3), default=0.0)
        for entry in ("xy", "xz", "yz")
    ),
    Key("body.tip_off_deg_s", "number", "°/s",
        "Rate at separation in body axes: the dispenser's worst case.", _within(360), shape=_XYZ),
    Key("body.residual_dipole_a_m2", "number", "A m²",
        "Dipole of the unpowered spacecraft, measured or budgeted.", _within(1), shape=_XYZ, default=_ZERO),
    Key("body.drag_force_n", "number", "N",
        "Aerodynamic force, against the orbital velocity.", _between(0, 0.1), default=0.0),
    Key("body.pressure_centre_m", "number", "m",
        "Centre of pressure from the centre of mass; the drag's lever.", _within(5), shape=_XYZ,
        default=_ZERO),
)

_ORBIT = (
    # The end is that of the IGRF-14 coefficients; the start only catches typing errors.
    Key("orbit.epoch_utc", "time", "",
        "Moment of separation.",
        Range(_new_year(1980), _new_year(2030), high_open=True), default=_OR_ELEMENTS),
    Key("orbit.altitude_km", "number", "km",
        "Height of the circular orbit above the equatorial radius.", _between(200, 2000),
        default=_OR_ELEMENTS),
    Key("orbit.inclination_deg", "number", "°",
        "Inclination to the equator; above 90 retrograde.", _between(0, 180), default=_OR_ELEMENTS),
    Key("orbit.node_deg", "number", "°",
        "Right ascension of the ascending node.", _within(360), default=_OR_ELEMENTS),
    Key("orbit.argument_of_latitude_deg", "number", "°",
        "Angle from the node to the spacecraft at the epoch.", _within(360),
        default=Depends("0 °, unless two_line_elements is given")),
    Key("orbit.two_line_elements", "text", "",
        "Both lines, 69 characters each; their epoch is the separation.", shape=(2,),
        default=Depends("none: the orbit is circular")),
)

_SUPPLY = tuple(
    Key(f"supply.{name}_v", "number", "V", meaning, _between(0.1, 100))
    for name, meaning in (
        ("min", "Lowest voltage of the coils' supply at which they are driven."),
        ("nominal", "Voltage at which the dipoles hold."),
        ("max", "Highest voltage of the coils' supply; dipole and heat grow with it."),
    )
)

_COIL = (
    Key("coil.*.core", "text", "",
        "Rod with a magnetic core, or a winding without.", choices=("cored", "air")),
    Key("coil.*.dipole_a_m2", "number", "A m²",
        "Full dipole at the nominal voltage of all that is mounted; a pair is not doubled again.",
        _positive(50), default=Depends("derived from the winding: required without one")),
    Key("coil.*.turns", "integer", "",
        "Turns of one winding.", _between(1, 100_000), default=_OR_DIPOLE),
    Key("coil.*.area_m2", "number", "m²",
        "Mean area of a turn.", _positive(10), default=_OR_DIPOLE),
    Key("coil.*.resistance_ohm", "number", "Ω",
        "Resistance of one winding, drivers included.", _between(0.01, 1e4), default=_OR_DIPOLE),
    Key("coil.*.resistance_temperature_c", "number", "°C",
        "Temperature at which the resistance was measured.", _between(-100, 150), default=_OR_DIPOLE),
    Key("coil.*.temperature_c", "number", "°C",
        "Temperature for which the dipole is derived: the hot case is the weaker.", _between(-100, 150),
        default=_OR_DIPOLE),
    Key("coil.*.mirrored_pair", "flag", "",
        "A second, equal winding on the opposite face, in parallel: doubles the derived dipole.",
        default=False),
    Key("coil.*.time_constant_ms", "number", "ms",
        "L/R of coil and driver: how fast the current decays.", _positive(200)),
    Key("coil.*.remanence_fraction", "number", "",
        "Part of the full dipole that stays in the core after a pulse.", _between(0, 0.2),
        default=Depends("0 for an air core; required for a cored one")),
    Key("coil.*.polarity", "integer", "",
        "1 if positive current makes a dipole along the positive axis, else -1: shown by the phasing test.",
        choices=(1, -1)),
    Key("coil.*.blanking_ms", "number", "ms",
        "Least age of this coil's switch-off at the start of a sample.", _duration_ms(5000),
        default=Depends("cycle.blanking_ms")),
)

_MAGNETOMETER = (
    Key("magnetometer.counts_per_ut", "number", "counts/µT",
        "Sensitivity; the range must fit into 16 bits.", _between(0.1, 1e4)),
    Key("magnetometer.range_ut", "number", "µT",
        "Full scale of each axis, either side of zero.", _between(10, 3000)),
    Key("magnetometer.noise_nt", "number", "nT",
        "Noise of one sample, rms, each axis, over the sample's length.", _between(0, 1e4)),
    Key("magnetometer.bias_ut", "number", "µT",
        "Known bias, removed on board.", _within(1000), shape=_XYZ, default=_ZERO),
    Key("magnetometer.bias_error_ut", "number", "µT",
        "What the calibration of the bias misses.", _within(100), shape=_XYZ, default=_ZERO),
    Key("magnetometer.misalignment_deg", "number", "°",
        "Known rotation vector of the sensor against the body.", _within(180), shape=_XYZ, default=_ZERO),
    Key("magnetometer.misalignment_error_deg", "number", "°",
        "What the alignment misses.", _within(30), shape=_XYZ, default=_ZERO),
    Key("magnetometer.stray_ut_per_a_m2", "number", "µT per A m²",
        "Field at the sensor per dipole: a column for each coil, a row for each axis.", _within(1e5),
        shape=(3, 3)),
)

_GYRO = (
    Key("gyro.counts_per_deg_s", "number", "counts per °/s",
        "Sensitivity; the range must fit into 16 bits.", _between(0.1, 1e5)),
    Key("gyro.range_deg_s", "number", "°/s",
        "Full scale of each axis, either side of zero.", _between(1, 4000)),
    Key("gyro.noise_deg_s", "number", "°/s",
        "Noise of one sample, rms, each axis.", _between(0, 10)),
    Key("gyro.bias_deg_s", "number", "°/s",
        "Known bias, removed on board.", _within(20), shape=_XYZ, default=_ZERO),
    Key("gyro.bias_error_deg_s", "number", "°/s",
        "Turn-on bias that the calibration misses.", _within(20), shape=_XYZ, default=_ZERO),
    Key("gyro.misalignment_deg", "number", "°",
        "Known rotation vector of the sensor against the body.", _within(180), shape=_XYZ, default=_ZERO),
    Key("gyro.misalignment_error_deg", "number", "°",
        "What the alignment misses.", _within(30), shape=_XYZ, default=_ZERO),
)

_CYCLE = (
    Key("cycle.period_ms", "number", "ms",
        "One control cycle; short against a turn at the tip-off rate.", _between(20, 10_000)),
    Key("cycle.blanking_ms", "number", "ms",
        "From the cycle's start to the sample: some L/R of the slowest coil.", _duration_ms(5000)),
    Key("cycle.sample_ms", "number", "ms",
        "Length over which the magnetometer averages.", _duration_ms(5000)),
    Key("cycle.compute_delay_ms", "number", "ms",
        "From the end of the sample to the start of the drive window.", _duration_ms(5000)),
    Key("cycle.drive_window_ms", "number", "ms",
        "Longest pulse; its part of the period bounds the mean dipole.", _duration_ms(10_000)),
    Key("cycle.pulse_tick_us", "integer", "µs",
        "Tick of the timer that makes the pulses.", _between(1, 10_000)),
    Key("cycle.shortest_pulse_ms", "number", "ms",
        "A shorter pulse is left out.", _between(0, 1000)),
    Key("cycle.timing_tolerance_ms", "number", "ms",
        "How far a sample may stray from its place in the cycle.", _between(0, 1000)),
)

_CONTROL = (
    Key("control.law", "text", "",
        "m = −k dB/dt from the field alone, or m = k (ω × B) with the gyro.", choices=("derivative", "rate")),
    Key("control.k_am2_s_per_t", "number", "A m² s/T",
        "The law's gain itself.", _positive(1e9), default=_ONE_GAIN),
    Key("control.K_n_m_s", "number", "N m s",
        "Gain times the square of the rms field: torque per rate.", _positive(100), default=_ONE_GAIN),
    Key("control.gain", "text", "",
        "The gain is derived from orbit and inertia.", choices=("auto",), default=_ONE_GAIN),
    Key("control.gain_scaling", "text", "",
        "The same gain always, or over ‖B‖² in each cycle.", choices=("constant", "normalised"),
        default="constant"),
    Key("control.saturation", "text", "",
        "Cut each axis alone, or shorten the dipole as a whole.", choices=("per-axis", "keep-direction"),
        default="keep-direction"),
    Key("control.low_pass_s", "number", "s",
        "Time constant of the low-pass on the derivative; 0 for none.", _between(0, 1000), default=0.0),
    Key("control.settle_by", "text", "",
        "What measures the rate for the settled decision.", choices=("gyro", "field"),
        default=Depends('"gyro" if there is one, else "field"')),
    Key("control.settled_deg_s", "number", "°/s",
        "Settled below this rate, once the dwell is over.", _between(0.01, 60)),
    Key("control.wake_deg_s", "number", "°/s",
        "Damping again above this rate.", _between(0.01, 180)),
    Key("control.dwell_s", "number", "s",
        "How long the rate must stay low before it counts as settled.", _between(0.1, 1e6),
        default=Depends("a quarter of the orbital period")),
    Key("control.wake_dwell_s", "number", "s",
        "How long the rate must stay high before damping begins again.", _between(0.1, 1e5), default=10.0),
    Key("control.hold_off_s", "integer", "s",
        "Coils stay off this long after separation.", _between(0, 1_000_000)),
    Key("control.field_min_ut", "number", "µT",
        "Least plausible field; a smaller one rejects the sample.", _between(0.1, 100),
        default=Depends("0.6 × the dipole field over the equator at the orbit's highest point")),
    Key("control.field_max_ut", "number", "µT",
        "Greatest plausible field; a larger one rejects the sample.", _between(0.1, 200),
        default=Depends("1.35 × the dipole field over the pole at the orbit's lowest point")),
    Key("control.bench_limit_ms", "number", "ms",
        "Longest pulse in bench mode.", _duration_ms(10_000)),
    Key("control.bench_key", "integer", "",
        "The word that arms bench mode.", _between(1, 65_535), default=0x5AA5),
)

_OR_OFF = "0: off."

_DEFENCE = (
    Key("defence.jump_ut", "number", "µT",
        "Largest change of the field from one sample to the next; a larger one rejects the sample.", _positive(1000),
        default=Depends("what 1.5 × the tip-off rate turns control.field_max_ut by in a period, and noise_ut's sources "
                        "but for the bias")),
    Key("defence.noise_ut", "number", "µT",
        "Change of the field's norm, which does not turn, from sample to sample beyond which the sensor is noisy.",
        _positive(1000),
        default=Depends("6 √2 × the noise, twice what the bias error and what coils leave behind can do, the way along "
                        "the orbit, and 2 counts")),
    Key("defence.frozen_s", "number", "s",
        f"How long all magnetometer counts may stand still. {_OR_OFF}", _between(0, 1e5),
        default=Depends("until the weakest field, turning at the orbital rate, moves by 10 counts, but at least 4 "
                        "periods; 0 if that takes more than 65535")),
    Key("defence.dead_axis_s", "number", "s",
        f"How long one magnetometer count may stand still while another moves. {_OR_OFF}", _between(0, 1e5),
        default=Depends("8 × frozen_s; with noise below half a count at least twice as long as a component stands "
                        "still at its extremum")),
    Key("defence.gyro_frozen_s", "number", "s",
        f"How long all gyro counts may stand still. {_OR_OFF}", _between(0, 1e5),
        default=Depends("20 periods; 0 without a gyro, or with one whose noise is below half a count")),
    Key("defence.gyro_error_deg_s", "number", "°/s",
        f"Contradiction between gyro and turn of the field that makes the gyro useless. {_OR_OFF}", _between(0, 360),
        default=Depends("the sum of what field noise, orbit, gyro noise, bias and alignment can do, but at least "
                        "control.wake_deg_s; 0 without a gyro, or above 0.5 rad a period")),
    Key("defence.divergence_guard", "flag", "",
        "Whether coils pause, and at last stay off, when the rate grows while damping.", default=True),
    Key("defence.guard_deg_s", "number", "°/s",
        "Growth counts as diverging above this rate only: faster than any tip-off.", _positive(1500),
        default=Depends("1.1 × the norm of body.tip_off_deg_s")),
    Key("defence.window_s", "number", "s",
        "Length over which the peak rate is taken; two such windows are compared.", _between(0.1, 1e6),
        default=Depends("half the orbital period")),
    Key("defence.pause_s", "number", "s",
        "How long coils stay off once the rate has grown.", _between(0.1, 1e6),
        default=Depends("the orbital period")),
    Key("defence.growth_percent", "number", "%",
        "Growth of the peak rate from one window to the next that counts as diverging.", _between(0.4, 300),
        default=5.0),
    Key("defence.progress_percent", "number", "%",
        "A peak rate that fell by less over two windows counts as no progress.", _positive(99), default=10.0),
    Key("defence.retries", "integer", "",
        "Pauses before the coils stay off for good.", _between(0, 1000), default=3),
)

_CURRENT_SENSE = (
    Key("current_sense.counts_at_full", "integer", "counts",
        "Reading at a coil's full current, at the nominal voltage.", _between(10, 32_000)),
    Key("current_sense.noise_counts", "number", "counts",
        "Noise of a reading, rms.", _between(0, 1000), default=0.0),
    Key("current_sense.off_counts", "integer", "counts",
        "A larger reading is not off; above 6 × the noise.", _between(1, 32_000),
        default=Depends("5 % of counts_at_full")),
    Key("current_sense.weak_percent", "number", "%",
        "A coil is weak below this share of the current that the lowest supply voltage drives.", _between(1, 99),
        default=50.0),
)

KEYS: tuple[Key, ...] = (
    Key("name", "text", "characters",
        "What the mission is called in reports.", _between(1, 80)),
    *_BODY, *_ORBIT, *_SUPPLY, *_COIL, *_MAGNETOMETER, *_GYRO, *_CYCLE, *_CONTROL, *_DEFENCE,
    *_CURRENT_SENSE,
)  # fmt: skip

OPTIONAL_TABLES = frozenset({"gyro", "current_sense"})

ORBITAL_PERIOD = "orbital period"
"""Name under which the period that follows from the orbit's keys stands beside them in messages."""


def each_axis(path: str) -> tuple[str, ...]:
    """The path, or the three paths that its `*` stands for."""
    return tuple(path.replace("*", axis) for axis in AXES) if "*" in path else (path,)


BY_PATH: dict[str, Key] = {path: replace(key, path=path) for key in KEYS for path in each_axis(key.path)}
"""Every key of a file by its full path: those of the coils three times."""
