"""What must hold before anyone signs: each check worked out from what flew, with its figure."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pyharness.loop import settling_time_s
from pyharness.review.flown import Flown
from pyharness.review.wording import percent
from pyharness.vectors.verdict import Verdict


@dataclass(frozen=True)
class Check:
    """One thing that must hold."""

    name: str
    passed: bool
    figure: str  # the number that decides it, in words


def checks(
    flights: Sequence[Flown], vectors: Sequence[Verdict], settle_within_s: float | None = None
) -> list[Check]:
    """All checks over all flights.

    `settle_within_s`: time for the handover flag; None: as `settling_time_s` has it.
    """
    return [
        *(_detumbled(flown) for flown in flights),
        *(_settled(flown, settle_within_s) for flown in flights),
        *(_within_bound(flown) for flown in flights),
        _blanking_kept(flights),
        _coils_off_in_samples(flights),
        _integrity(flights),
        _vectors(vectors),
    ]


def _detumbled(flown: Flown) -> Check:
    rate = flown.record.true_rate_deg_s
    return Check(
        f"Detumbled, {flown.title}: true ‖ω‖ ends below {flown.slow_deg_s:g} °/s",
        bool(rate[-1] < flown.slow_deg_s),
        f"from {rate[0]:.2f} to {rate[-1]:.3f} °/s in {flown.cycles * flown.scaling.period_s:.0f} s",
    )


def _settled(flown: Flown, within_s: float | None) -> Check:
    within_s = settling_time_s(flown.scaling.mission) if within_s is None else within_s
    name = f"Settled, {flown.title}: handover flag within {within_s:.0f} s"
    if flown.settled_at is None:
        return Check(name, False, f"no handover flag in {flown.record.time_s[-1]:.0f} s")
    at = flown.record.time_s[flown.settled_at]
    true = flown.record.true_rate_deg_s[flown.settled_at]
    return Check(name, bool(at <= within_s), f"at {at:.0f} s, true ‖ω‖ then {true:.3f} °/s")


def _within_bound(flown: Flown) -> Check:
    comparison = flown.comparison
    acted = int(comparison.active.sum())
    return Check(
        f"Controller within its bound of the truth, {flown.title}",
        comparison.within and acted > 0,
        f"largest share of the bound used {percent(comparison.used)} (mean dipole), "
        f"{percent(comparison.used_ticks)} (pulse width), "
        f"in {acted} cycles in which the law acted",
    )


def sample_gaps_us(flown: Flown) -> tuple[np.ndarray, np.ndarray]:
    """Time between coils and samples from what really happened, µs.

    First (cycles − 1, 3): from each coil's actual switch-off to the start of the next sample; the largest
    integer for a coil that was off in that cycle. Second (cycles,): from the end of a sample to the start of
    the pulses that follow.
    """
    timeline, record = flown.scaling.timeline, flown.record
    path = record.inputs["path"]
    half = timeline.sample_us // 2
    mid = (path["sample_us"] - path["cycle_start_us"]).astype(
        np.int64
    )  # the stamps wrap, their difference does not
    mid = np.where(path["mag_valid"] != 0, mid, timeline.mid_sample_us)
    on = np.abs(record.applied_ticks[:-1]).astype(np.int64)
    switch_off = timeline.drive_start_us + on * timeline.tick_us
    age = timeline.period_us + mid[1:, None] - half - switch_off
    return np.where(on > 0, age, np.iinfo(np.int64).max), timeline.drive_start_us - (mid + half)


def _blanking_kept(flights: Sequence[Flown]) -> Check:
    """Both as the controller's gate saw it and from the pulses as they really were."""
    broken, least_spare, least_age = 0, None, None
    for flown in flights:
        needed = np.array(flown.scaling.config["path"]["blanking_us"])
        seen = flown.record.outputs["trace"]["gate"]["age_us"].astype(np.int64)
        real = np.minimum(seen[1:], sample_gaps_us(flown)[0])
        age = np.concatenate((seen[:1], real))[flown.trusted]
        broken += int((age < needed).any(axis=1).sum())
        if age.size and (least_spare is None or (age - needed).min() < least_spare):
            least_spare = int((age - needed).min())
            least_age = int(age.min())
    name = "No sample used inside the blanking time"
    if least_spare is None:
        return Check(name, False, "no trusted sample at all")
    spare = f"{abs(least_spare) / 1e3:.1f} ms {'more' if least_spare >= 0 else 'less'} than the gate requires"
    return Check(
        name, broken == 0,
        f"{broken} trusted samples with a coil off for too short a time; shortest {least_age / 1e3:.1f} ms, "
        f"{spare}",
    )  # fmt: skip


def _coils_off_in_samples(flights: Sequence[Flown]) -> Check:
    before = min(int(sample_gaps_us(flown)[0].min(initial=np.iinfo(np.int64).max)) for flown in flights)
    after = min(int(sample_gaps_us(flown)[1].min()) for flown in flights)
    pulses = sum(int(np.count_nonzero(flown.record.applied_ticks)) for flown in flights)
    clear = (
        f"every one of {pulses} pulses ends at least {before / 1e3:.1f} ms before a sample"
        if pulses
        else "no pulse at all"
    )
    return Check(
        "No coil on during a sample", before >= 0 and after >= 0 and pulses > 0,
        f"{clear} and starts at least {after / 1e3:.1f} ms after one",
    )  # fmt: skip


def _integrity(flights: Sequence[Flown]) -> Check:
    foreign = sum(int((f.record.outputs["digest"] != f.scaling.config["digest"]).sum()) for f in flights)
    faults = sum(int((f.bit("STATE_RESTARTED") | f.bit("CONFIG_CORRUPT")).sum()) for f in flights)
    cycles = sum(flown.cycles for flown in flights)
    return Check(
        "The configuration on this page is the one that flew, without an integrity fault",
        foreign == 0 and faults == 0,
        f"{foreign} of {cycles} cycles report another digest, {faults} an integrity fault",
    )


def _vectors(vectors: Sequence[Verdict]) -> Check:
    failed = [verdict.name for verdict in vectors if not verdict.passed]
    rows = sum(verdict.rows for verdict in vectors)
    figure = (
        f"{len(vectors) - len(failed)} of {len(vectors)} files, {rows} rows"
        if vectors
        else "no vectors were replayed"
    )
    return Check(
        "Golden vectors: every file replayed without a difference", bool(vectors) and not failed,
        figure + (f"; failed: {', '.join(failed)}" if failed else ""),
    )  # fmt: skip
