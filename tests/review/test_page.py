"""The page: complete, true to its data, safe, and the same each time."""

import os
import re
from dataclasses import replace
from html.parser import HTMLParser

import numpy as np
import pytest
from review.conftest import with_mission

from pyharness.mission.schema import KEYS
from pyharness.review import page, render, review_data, write_page
from pyharness.review.blanking import blanking_margins

COMMAND = "slackwater review --out page.html"
SECTIONS = (
    "verdict",
    "caution",
    "numbers",
    "figures",
    "timeline",
    "vectors",
    "mission",
    "configuration",
    "status",
    "reproduce",
)
VOID = {"meta", "br", "link", "img", "hr", "input"}


class Reader(HTMLParser):
    """Checks that tags are balanced; collects attributes, and the text of each section by its id."""

    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.open, self.ids, self.links, self.tags = [], [], [], set()
        self.section, self.texts = None, {}
        self.feed(text)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag, attrs):
        self.tags.add(tag)
        attributes = dict(attrs)
        assert len(attributes) == len(attrs), f"attribute twice in <{tag}>"
        assert not any(name.startswith("on") for name in attributes)
        if "id" in attributes:
            self.ids.append(attributes["id"])
        self.links += [attributes[name] for name in ("href", "src", "xlink:href") if name in attributes]
        if tag == "section":
            self.section = attributes["id"]
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        assert self.open and self.open.pop() == tag, f"</{tag}> without its start"
        if tag in ("td", "th"):
            self.handle_data(" ")
        if tag == "section":
            self.section = None

    def handle_data(self, data):
        if self.open[-1:] != ["style"]:
            self.texts[self.section] = self.texts.get(self.section, "") + data


def rows(reader, section):
    """The words of a section without line breaks, as a reader sees them."""
    return re.sub(r"\s+", " ", reader.texts[section].replace("\u00a0", " "))


@pytest.fixture(scope="module")
def data(flights, vectors):
    return review_data(flights, vectors, COMMAND)


@pytest.fixture(scope="module")
def text(data):
    return render(data)


@pytest.fixture(scope="module")
def reader(text):
    return Reader(text)


@pytest.fixture
def one_figure(monkeypatch):
    """Pages with a single figure, where figures do not matter."""
    monkeypatch.setattr(page, "PLOTS", [plot for plot in page.PLOTS if plot.name == "samples"])


def test_html_is_well_formed_and_self_contained(text, reader):
    assert text.startswith("<!DOCTYPE html>")
    assert len(reader.ids) == len(set(reader.ids))
    assert all(link.startswith("#") and link[1:] in reader.ids for link in reader.links)
    assert not {"script", "link", "iframe", "object", "img"} & reader.tags
    assert (
        "@import" not in text
        and "http" not in text
        and all(u.startswith("url(#") for u in re.findall(r"url\([^)]*\)", text))
    )
    assert set(re.findall(r"url\(#([^)]*)\)", text)) <= set(reader.ids)
    assert len(text.encode()) < 2_500_000


def test_every_section_is_there_in_order(reader):
    assert [i for i in reader.ids if i in SECTIONS] == list(SECTIONS)
    assert all(len(reader.texts[section].split()) > 10 for section in SECTIONS)


def test_caution(reader):
    caution = rows(reader, "caution")
    for words in (
        "not flight-qualified",
        "polarity of every coil and of every sensor axis must be shown on the hardware",
        "licensed or delegated authority",
    ):
        assert words in caution


def test_same_data_same_bytes(data, text):
    assert render(data) == text


def test_numbers_are_those_of_the_records(flights, reader):
    shown = rows(reader, "numbers")
    for flown in flights:
        record = flown.record
        assert f"{np.degrees(np.linalg.norm(record.rate_rad_s[-1])):.3f} °/s" in shown
        duty = np.abs(record.applied_ticks).mean(axis=0) * 1e-4 / 0.5
        assert (
            ", ".join(f"{axis} {share * 100:.1f} %" for axis, share in zip("xyz", duty, strict=True)) in shown
        )
        error = np.abs(flown.comparison.command_error * flown.comparison.dipole_a_m2 / 32768).max() * 1e3
        assert f"{error:.3f} mA m² where" in shown
        used = (flown.comparison.command_error / np.maximum(flown.comparison.command_bound, 1e-9)).max()
        assert f"{used * 100:.1f} % of the dipole's" in shown
    rejected = [int((f.record.outputs["trace"]["gate"]["trusted"] == 0).sum()) for f in flights]
    assert f"Samples rejected {rejected[0]} {rejected[1]} " in shown and rejected[0] > 3


def test_timeline_and_margins(data, reader):
    shown = rows(reader, "timeline")
    for words in (
        "blanking: coils off, currents decay 0.000 60.000 60.000",
        "sample 60.000 80.000 20.000",
        "compute delay 80.000 90.000 10.000",
        "drive window 90.000 490.000 400.000",
    ):
        assert words in shown
    for margin in blanking_margins(data.scaling):
        assert f"{margin.needed_ms:.1f} 60.0 70.0 {margin.margin_ms:+.1f} yes" in shown


def test_a_coil_that_needs_more_blanking_is_called_out(data, flights, one_figure):
    slow = replace(data.mission.coil[0], time_constant_ms=20.0)
    flown = with_mission(flights[0], coil=(slow, *data.mission.coil[1:]))
    shown = rows(Reader(render(replace(data, flights=(flown,)))), "timeline")
    assert "141.8 60.0 70.0 -81.8 NO" in shown  # 20 ms × ln(14.98 µT / 12.5 nT)


def test_mission_configuration_and_digests(data, reader):
    mission = rows(reader, "mission")
    assert "body.inertia_kg_m2.xz -0.0008 kg m²" in mission
    assert "coil.z.dipole_a_m2 0.208195822 A m²" in mission  # 240 × 0.0072 × 7.4 / (58 × 1.05895)
    assert mission.index("coil.x.polarity") < mission.index("coil.y.core")
    tables = {key.path.partition(".")[0] for key in KEYS} - {"current_sense"}  # which the demo does not have
    assert all(table in mission for table in tables)
    configuration = rows(reader, "configuration")
    for words in (
        "path.window_ticks 4000 400 ms",
        "path.blanking_us 60000, 60000, 60000 60 60 60 ms",
        "path.polarity 1, -1, 1",
        "path.saturation 2 keep direction",
        "supervisor.settle_by 2 gyro",
        "path.norm_max_sq 1073676289 62.4 µT",
    ):
        assert words in configuration
    reproduce = rows(reader, "reproduce")
    for words in (
        COMMAND,
        data.mission.digest,
        data.interface.sources.digest,
        f"{data.scaling.config['digest']:08x}",
    ):
        assert words in reproduce


def test_status_dictionary_has_the_header_s_texts_and_the_counts(data, reader):
    shown = rows(reader, "status")
    names = data.interface.header.named("MRD_S_")
    assert len(names) == 32
    for bit, name in names.items():
        counts = " ".join(str(int((f.record.outputs["status"] >> bit & 1).sum())) for f in data.flights)
        assert f"{bit} {name} {data.interface.header.texts[f'MRD_S_{name}']} {counts} " in shown


def test_vectors_with_their_verdicts(reader):
    shown = rows(reader, "vectors")
    assert (
        "PASS loop/nominal tip-off with saturated coils 1200 equal in all columns" in shown
        and "FAIL" not in shown
    )


def test_verdict_says_which_checks_fail(data, reader):
    shown = rows(reader, "verdict")
    assert len(data.failed) == 4  # a short flight neither detumbles nor settles, and there are two
    assert "FAIL 4 of 10 checks do not hold." in shown
    for check in data.checks:
        assert f"{'PASS' if check.passed else 'FAIL'} {check.name} {check.figure}" in shown


def test_verdict_passes_only_when_every_check_does(data, vectors, one_figure):
    good = replace(data, checks=tuple(replace(check, passed=True) for check in data.checks))
    shown = rows(Reader(render(good)), "verdict")
    assert "PASS All 10 checks hold." in shown and "FAIL" not in shown
    bad = replace(good, checks=(replace(good.checks[0], passed=False), *good.checks[1:]))
    shown = rows(Reader(render(bad)), "verdict")
    assert f"FAIL 1 of 10 checks does not hold. {bad.checks[0].name}" in shown


def test_failed_and_missing_vectors(data, flights, vectors, one_figure):
    failed = replace(vectors[1], passed=False, detail="row 17, trace.gate.trusted: 1, expected 0")
    shown = Reader(render(review_data(flights, [vectors[0], failed], COMMAND)))
    assert (
        "FAIL unit/gate ages at the edge of the blanking time 37 row 17, trace.gate.trusted: 1, expected 0"
        in rows(shown, "vectors")
    )
    assert "Golden vectors: every file replayed without a difference: 1 of 2 files" in rows(shown, "verdict")
    assert "FAIL No vectors were replayed." in rows(
        Reader(render(review_data(flights, [], COMMAND))), "vectors"
    )


def test_hostile_texts_stay_texts(flights, vectors, one_figure):
    evil = "</title><script>alert('$x$')</script>&amp;\"'><b id=\"verdict\">"
    flown = replace(with_mission(flights[0], name=evil, source=evil), title=evil)
    verdict = replace(vectors[0], name=evil, purpose=evil, detail=evil)
    shown = Reader(render(review_data([flown], [verdict], evil)))
    assert "script" not in shown.tags and "b" not in shown.tags and len(shown.ids) == len(set(shown.ids))
    for section in ("verdict", "numbers", "figures", "vectors", "mission", "reproduce"):
        assert evil in shown.texts[section]


def test_a_page_needs_a_flight(vectors):
    with pytest.raises(ValueError, match="flights"):
        review_data([], vectors, COMMAND)


def test_page_is_written_whole_or_not_at_all(data, tmp_path, monkeypatch):
    path = tmp_path / "review.html"
    monkeypatch.setattr(page, "render", lambda data: "the page ‖ω‖\n")
    write_page(data, path)
    assert path.read_bytes() == "the page ‖ω‖\n".encode()

    def interrupted(source, target):
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "replace", interrupted)
    monkeypatch.setattr(page, "render", lambda data: "another page")
    with pytest.raises(KeyboardInterrupt):
        write_page(data, path)
    assert path.read_bytes() == "the page ‖ω‖\n".encode()
    assert list(tmp_path.iterdir()) == [path]
