"""Every single flipped bit, in a short flight; and that a controller without its defences is found out."""

from __future__ import annotations

import shutil

import pytest

from pyharness.controllers import CController, load_controller
from pyharness.faults.bits import bit_moments, flip_every_bit
from pyharness.flight import Library, find_sources
from pyharness.flight.records import columns
from pyharness.loop import Flight, Record, fly
from pyharness.mission import demo_path, load_mission
from pyharness.scaling import scale


@pytest.fixture(scope="module")
def c() -> CController:
    return load_controller("c")


def record_of(c: CController, **control: object) -> Record:
    scaling = scale(load_mission(demo_path(), {"control": {"dwell_s": 120.0, "hold_off_s": 5, **control}}))
    (record,) = fly([Flight(scaling, 700, rate_deg_s=(0.9, -0.7, 0.5), separation_s=0)], c)
    return record


@pytest.mark.parametrize("control", [{}, {"law": "rate"}, {"low_pass_s": 1.0}], ids=["derivative", "rate", "low-pass"])
def test_every_bit_at_every_moment(c, control):
    tallies = list(flip_every_bit(record_of(c, **control), c))
    assert len(tallies) == 3 * 8 and not [tally for tally in tallies if not tally.passed]
    assert all(tally.wild == 0 for tally in tallies)
    assert all(tally.caught == tally.tried for tally in tallies if tally.part != "inputs")


def test_every_integer_is_flipped_whole(c):
    """Sixteen or thirty-two bits of each column."""
    record = record_of(c)
    tallies = {tally.part: tally for tally in flip_every_bit(record, c, bit_moments(record)[:1])}
    for part, dtype in (("state", c.interface.state), ("config", c.interface.config), ("inputs", c.interface.inputs)):
        assert 16 * len(columns(dtype)) < tallies[part].tried < 32 * len(columns(dtype))
    assert tallies["inputs"].tried == 32 * 6 + 16 * (len(columns(c.interface.inputs)) - 6)  # two times, three stamps, one clock


@pytest.mark.parametrize(
    ("unit", "old", "new", "part"),
    [
        ("step.c", "if (state->digest == mrd_state_digest(state)) {", "if (1) {", "state"),
        ("integrity.c", "    h = mix(h, path->norm);\n", "", "state"),
        ("step.c", "if (config->digest != mrd_config_digest(config)) {", "if (0) {", "config"),
        ("modes.c", "return dwells(state, 2) ? MRD_MODE_DAMPING", "return dwells(state, 1) ? MRD_MODE_DAMPING", "inputs"),
    ],
    ids=["state unchecked", "a field left out", "configuration unchecked", "hold-off ends at once"],
)
def test_a_controller_without_a_defence_is_found_out(c, tmp_path, unit, old, new, part):
    sources = tmp_path / "fsw_c"
    shutil.copytree(find_sources().root, sources)
    path = sources / "src" / unit
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new))
    weak = CController(Library(sources=find_sources(sources)))
    failed = {tally.part for tally in flip_every_bit(record_of(c), weak) if not tally.passed}
    assert part in failed
