"""Promise 7: writing again gives the same bytes; and the C flies the same closed loop as the exact model did."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from pyharness.controllers import load_controller
from pyharness.flight.records import to_columns
from pyharness.loop import fly
from pyharness.mission import MissionError, demo_path
from pyharness.scenarios import FAULTY, LONG, LOOP
from pyharness.vectors import make_vectors, read_vector, write_folder
from pyharness.vectors.digests import first_difference, read_digest
from pyharness.vectors.unit import UNIT

FOLDER = Path(__file__).parents[2] / "vectors"
SHORT = (*LOOP, *FAULTY)

WRITE = """
import sys
from pathlib import Path
from pyharness.flight import Interface, find_sources
from pyharness.mission import demo_path
from pyharness.vectors import make_vectors, write_folder
write_folder(Path(sys.argv[1]), make_vectors(str(demo_path()), Interface(find_sources()), long_flights=False))
"""


@pytest.fixture(scope="module")
def flown():
    """All scenarios, with the C controller in the loop; those of like length in one batch."""
    controller, records = load_controller("c"), {}
    for scenarios in (FAULTY, LOOP, LONG):
        flights = [scenario.flight(str(demo_path())) for scenario in scenarios]
        records |= zip([s.name for s in scenarios], fly(flights, controller), strict=True)
    return records, controller.interface


@pytest.mark.parametrize("features", ["", "X86_V3 X86_V4 AVX512_ICL AVX512_SPR AVX2 FMA3 AVX512F AVX512CD AVX512_SKX AVX512_CLX AVX512_CNL"],
                         ids=["as it is", "without AVX2 and AVX-512"])  # fmt: skip
def test_writing_gives_the_committed_bytes(tmp_path, features):
    """Also where numpy may not use AVX2 and AVX-512. Names that a numpy does not know only make it warn."""
    environment = {**os.environ, "NPY_DISABLE_CPU_FEATURES": features}
    subprocess.run([sys.executable, "-W", "ignore", "-c", WRITE, str(tmp_path)], env=environment, check=True, cwd=FOLDER.parent)
    written = sorted(path.relative_to(tmp_path).as_posix() for path in tmp_path.rglob("*.csv"))
    assert written == sorted(path.relative_to(FOLDER).as_posix() for path in FOLDER.rglob("*.csv"))
    for name in written:
        assert (tmp_path / name).read_bytes() == (FOLDER / name).read_bytes(), name


@pytest.mark.parametrize("scenario", SHORT, ids=lambda s: s.name)
def test_the_c_flies_the_golden_flight(flown, scenario):
    records, interface = flown
    vector = read_vector(FOLDER / "loop" / f"{scenario.name}.csv", interface)
    record = records[scenario.name]
    np.testing.assert_array_equal(to_columns(record.inputs), to_columns(vector.inputs))
    np.testing.assert_array_equal(to_columns(record.outputs), to_columns(vector.outputs))


@pytest.mark.parametrize("scenario", LONG, ids=lambda s: s.name)
def test_the_demo_detumbles(flown, scenario):
    """At least 10 °/s on each axis (as a spin along the field: that much in all) to below 0.5 °/s of true ‖ω‖, settled
    within about an orbit; and the flight is the one that the exact model flew, to the last integer."""
    records, _ = flown
    record = records[scenario.name]
    mission = record.flight.scaling.mission
    assert min(map(abs, mission.body.tip_off_deg_s)) >= 10
    assert record.true_rate_deg_s[0] == pytest.approx(np.degrees(mission.tip_off_rad_s))
    assert record.true_rate_deg_s[-1] < 0.5
    settled = np.flatnonzero(record.outputs["handover"])[0]
    assert record.time_s[settled] < 5800
    assert record.true_rate_deg_s[settled] < 0.5
    content = read_digest(FOLDER / "digests" / f"{scenario.name}.json")
    assert first_difference(content, record) is None


def test_a_digest_places_a_difference(flown):
    records, _ = flown
    record = records[LONG[0].name]
    content = read_digest(FOLDER / "digests" / f"{LONG[0].name}.json")
    record.outputs["rate"][5000] ^= 1
    assert first_difference(content, record) == "integers differ first between cycles 4800 and 5399"
    record.outputs["rate"][5000] ^= 1
    assert first_difference({**content, "config_digest": "0"}, record).startswith("configuration ")


def test_the_scenarios_reach_what_they_are_for(flown):
    """Each named state is really visited: status bits, modes, both laws, dropped pulses."""
    records, interface = flown
    bits = {name: False for name in interface.header.named("MRD_S_").values()}
    for record in records.values():
        for number, name in interface.header.named("MRD_S_").items():
            bits[name] |= bool(record.bit(number).any())
    for path in (FOLDER / "unit").glob("*.csv"):
        status = read_vector(path, interface).outputs["status"]
        for number, name in interface.header.named("MRD_S_").items():
            bits[name] |= bool((status >> np.uint32(number) & 1).any())
    # An integrity fault cannot be brought about by inputs.
    assert [name for name, seen in bits.items() if not seen] == ["STATE_RESTARTED", "CONFIG_CORRUPT"]
    modes = {int(mode) for record in records.values() for mode in np.unique(record.outputs["mode"])}
    assert modes == set(interface.header.named("MRD_MODE_"))
    woken = records["settled-and-woken"].outputs["mode"]
    assert [interface.mode_name(int(m)) for m in woken[np.r_[True, np.diff(woken.astype(int)) != 0]]] == [
        "hold-off", "damping", "settled", "damping", "settled"]  # fmt: skip
    laws = records["gyro-loss"].outputs["trace"]["law"]["active"]
    assert {1, 2} <= set(np.unique(laws).tolist())
    wrapped = records["stamp-wrap"].inputs["path"]["sample_us"].astype(int)
    assert (np.diff(wrapped) < 0).sum() == 1


def test_the_equatorial_orbit_leaves_a_rate_undamped(flown):
    """Common practice: in the plane of the magnetic equator the field hardly turns, and the rate about it stays."""
    records, _ = flown
    record = records["equatorial"]
    along = np.abs((record.rate_rad_s * record.field_t).sum(axis=1)) / np.linalg.norm(record.field_t, axis=1)
    across = np.sqrt((record.rate_rad_s**2).sum(axis=1) - along**2)
    assert np.degrees(across[-1]) < 0.25 * np.degrees(across[0])
    assert along[-1] > 3 * across[-1]


def test_a_mission_that_a_scenario_does_not_fit_is_told(tmp_path):
    text = demo_path().read_text().replace("range_deg_s = 120.0", "range_deg_s = 40.0").replace("counts_per_deg_s = 240", "counts_per_deg_s = 700")
    path = tmp_path / "slow-gyro.toml"
    path.write_text(text)
    from pyharness.flight import Interface, find_sources

    with pytest.raises(MissionError, match=r"slow-gyro\.toml as scenario fast-tumble changes it: 1 problem"):
        make_vectors(str(path), Interface(find_sources()))


def test_stale_files_go_and_equal_ones_stay(tmp_path):
    assert write_folder(tmp_path, {"unit/a.csv": "1\n", "loop/b.csv": "2\n"}) == ["unit/a.csv", "loop/b.csv"]
    (tmp_path / "README.md").write_text("kept")
    assert write_folder(tmp_path, {"unit/a.csv": "1\n"}) == ["loop/b.csv"]
    assert sorted(p.name for p in tmp_path.rglob("*") if p.is_file()) == ["README.md", "a.csv"]


def test_names_are_unique():
    for tier in (SHORT, LONG, UNIT):
        names = [item.name for item in tier]
        assert len(names) == len(set(names))
