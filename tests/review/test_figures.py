"""The figures show what the records hold."""

import io
from dataclasses import replace
from xml.etree import ElementTree

import matplotlib
import numpy as np
import pytest
from matplotlib.figure import Figure
from review.conftest import DROPPED, with_mission

from pyharness.review import figures, save_figures
from pyharness.review.bins import Bins
from pyharness.review.dipole import dipole_figure, duty_figure
from pyharness.review.error import error_figure
from pyharness.review.figures import PLOTS
from pyharness.review.magnifier import cycle_figure, decaying_dipole, default_cycle
from pyharness.review.numbers import numbers
from pyharness.review.rates import rates_figure
from pyharness.review.samples import samples_figure
from pyharness.review.style import inline_svg, save

SVG = "{http://www.w3.org/2000/svg}"


def lines(figure, label):
    """All lines with this label."""
    return [line for axes in figure.axes for line in axes.lines if line.get_label() == label]


def texts(figure):
    return [text.get_text() for text in figure.findobj(matplotlib.text.Text)]


def without_saturation(flown):
    outputs = flown.record.outputs.copy()
    mask = sum(1 << flown.constant(f"S_SATURATED_{axis}") for axis in "XYZ")
    outputs["status"] &= np.uint32(~mask & 0xFFFFFFFF)
    return replace(flown, record=replace(flown.record, outputs=outputs))


@pytest.mark.parametrize("plot", PLOTS, ids=lambda plot: plot.name)
def test_every_figure_stands_alone(plot, flown):
    figure = plot.draw(flown)
    assert isinstance(figure, Figure)
    title = figure.get_suptitle()
    assert flown.scaling.mission.name in title and flown.title in title
    assert any("[ms]" in axes.get_xlabel() or "[s]" in axes.get_xlabel() for axes in figure.axes)


@pytest.mark.parametrize("draw", [rates_figure, cycle_figure])
def test_a_flight_that_bears_its_mission_s_name_is_named_once(flown, draw):
    name = flown.scaling.mission.name
    assert draw(replace(flown, title=name)).get_suptitle().count(name) == 1


def test_caption_says_what_the_estimate_can_see(flown):
    (plot,) = [plot for plot in PLOTS if plot.name == "rates"]
    by_gyro, by_field = (
        plot.caption_of(with_mission(flown, control={"settle_by": sensor})) for sensor in ("gyro", "field")
    )
    assert "estimate should stay around it" in by_gyro and "across the field:" not in by_gyro
    assert "may lie below the true rate" in by_field and "stay around it" not in by_field


def test_saturated_cycles_are_marked_one_by_one(flown):
    marks = lines(dipole_figure(flown), "saturated")
    assert len(marks) == 3
    for axis, mark in enumerate(marks):
        shown = mark.get_xdata().astype(int)
        first = int(np.argmax(flown.saturated.any(axis=1)))
        window = np.arange(first - 10, first + 50)
        assert np.array_equal(shown, window[flown.saturated[window, axis]]) and len(shown) > 5
        limit = flown.scaling.dipole_a_m2[axis] * 1e3
        assert np.abs(mark.get_ydata()).max() == pytest.approx(limit, rel=2e-3)
    assert all(
        mark.get_xdata().size == 0 for mark in lines(dipole_figure(without_saturation(flown)), "saturated")
    )


def test_share_of_saturated_cycles_is_that_of_the_status_words(flown):
    status = flown.record.outputs["status"].astype(int)
    damping = flown.record.outputs["mode"] == 5
    dipole, duty = texts(dipole_figure(flown)), texts(duty_figure(flown))
    for axis in range(3):
        share = np.mean(damping & (status >> (13 + axis) & 1 == 1))
        assert share > 0.3
        assert f"saturated in {share * 100:.1f} % of all cycles" in dipole
        assert any(f"axis {'xyz'[axis]}, {share * 100:.1f} % of all" in text for text in duty)


def test_applied_dipole_follows_the_pulses_not_the_command(flown):
    assert (
        not flown.duty[:60].any() and flown.commanded_a_m2[1:60].any()
    )  # hold-off: the law asks, no pulse leaves
    assert not flown.applied_a_m2[:60].any()
    as_asked = (flown.record.outputs["ticks"] == flown.record.applied_ticks).all(axis=1)
    damping = flown.driven & as_asked & ~flown.bit_per_axis("SHORT_PULSE").any(axis=1)
    tick = np.array(flown.scaling.dipole_a_m2) / flown.scaling.timeline.window_ticks
    assert (np.abs(flown.applied_a_m2 - flown.commanded_a_m2)[damping] <= 0.52 * tick).all()


def test_samples_figure_shows_what_was_dropped(flown):
    figure = samples_figure(flown)
    (axes,) = figure.axes
    labels = [label.get_text() for label in axes.get_yticklabels()]
    counts = dict(zip(labels, [t.get_text() for t in axes.texts], strict=False))
    assert counts["rejected: sample missing"] == str(len(DROPPED))
    assert counts["rejected: blanked"] == str(int(flown.bit("BLANKED").sum())) != "0"
    assert counts["sample rejected"] == str(int((~flown.trusted).sum()))
    row = labels.index("rejected: sample missing")
    (bars,) = [bars for bars in axes.collections if _row(bars) == row]
    (path,) = bars.get_paths()
    start, end = path.vertices[:, 0].min(), path.vertices[:, 0].max()
    period = flown.scaling.period_s
    assert start <= DROPPED.start * period and end >= DROPPED.stop * period
    assert end - start < 3 * len(DROPPED) * period


def _row(bars):
    paths = bars.get_paths()
    return round(float(np.mean(paths[0].vertices[:4, 1]))) if paths else None


def test_error_figure_reaches_the_largest_error_and_bound(flown):
    comparison = flown.comparison
    figure = error_figure(flown)
    dipole, ticks = lines(figure, "largest error")
    assert dipole.get_ydata().max() == pytest.approx(comparison.command_error_a_m2.max() * 1e3)
    assert ticks.get_ydata().max() == pytest.approx(comparison.ticks_error.max())
    bound, _ = lines(figure, "bound (band: its least to its greatest)")
    assert bound.get_ydata().max() == pytest.approx(
        (comparison.command_bound / 32768 * comparison.dipole_a_m2).max() * 1e3
    )


def test_rates_figure_names_the_moments_only_when_they_came(flown):
    assert not any("first below" in text for text in texts(rates_figure(flown)))
    rate = flown.record.rate_rad_s.copy()
    rate[800:] = 0.0
    slow = replace(flown, record=replace(flown.record, rate_rad_s=rate))
    assert any("first below 0.5 °/s, 400.0 s" in text for text in texts(rates_figure(slow)))
    fast = with_mission(slow, control={"settled_deg_s": 0.3})
    assert any("first below 0.3 °/s, 400.0 s" in text for text in texts(rates_figure(fast)))


@pytest.mark.parametrize("slow, settled", [(100, 140), (140, 100), (500, 560), (560, 500), (870, 890)])
def test_no_line_of_a_moment_crosses_a_label(flown, slow, settled):
    rate, outputs = flown.record.rate_rad_s.copy(), flown.record.outputs.copy()
    rate[slow:] = np.radians(0.1)
    outputs["handover"][settled:] = 1
    figure = rates_figure(replace(flown, record=replace(flown.record, rate_rad_s=rate, outputs=outputs)))
    figure.draw_without_rendering()
    axes = figure.axes[1]
    labels = [label.get_window_extent() for label in axes.texts]
    marks = [line.get_window_extent() for line in axes.lines if len(set(line.get_xdata())) == 1]
    assert len(labels) == len(marks) == 2
    assert not any(label.overlaps(mark) for label in labels for mark in marks)
    assert not labels[0].overlaps(labels[1])
    assert all(axes.bbox.x0 <= label.x0 and label.x1 <= axes.bbox.x1 for label in labels)


def test_modes_too_narrow_for_their_names_are_told_by_their_colour(flown):
    outputs = flown.record.outputs.copy()
    outputs["mode"][15:] = flown.constant("MODE_DAMPING")
    modes = rates_figure(replace(flown, record=replace(flown.record, outputs=outputs))).axes[0]
    assert modes.get_title("left") == "Mode (grey, unlabelled: hold-off, until 7.5 s)"
    red, green, blue, _ = modes.patches[0].get_facecolor()
    assert red == green == blue < 0.9


def test_short_pulses_are_counted_alike_in_figure_and_table(flown):
    outputs = flown.record.outputs.copy()
    bits = [1 << flown.constant(f"S_SHORT_PULSE_{axis}") for axis in "XYZ"]
    outputs["status"] &= np.uint32(~sum(bits) & 0xFFFFFFFF)
    outputs["status"][[10, 20, 400]] |= np.uint32(bits[1])  # two in hold-off, one while damping
    flown = replace(flown, record=replace(flown.record, outputs=outputs))
    assert [text.get_text() for text in error_figure(flown).axes[3].texts] == ["0", "1", "0"]
    assert dict(numbers([flown]))["Short pulses dropped while damping"] == ["x 0, y 1, z 0"]


def test_magnified_cycle_is_saturated_and_follows_pulses(flown):
    cycle = default_cycle(flown)
    assert flown.saturated[cycle].any() and flown.record.applied_ticks[cycle - 1].any()
    assert not flown.saturated[: cycle - 1].any()
    assert any("demand saturated" in text for text in texts(cycle_figure(flown)))


def test_tail_of_the_cycle_before_reaches_into_the_blanking(flown):
    """I0 exp(-t R/L) from switch-off on: closed form, derived here."""
    cycle = default_cycle(flown)
    axis = int(np.argmax(np.abs(flown.record.applied_ticks[cycle - 1])))
    coil = flown.scaling.mission.coil[axis]
    width_ms = abs(int(flown.record.applied_ticks[cycle - 1, axis])) * 0.1
    time_ms = np.array([1.0, 20.0, 60.0])
    since_off = time_ms + 500.0 - 90.0 - width_ms
    expected = (
        coil.dipole_a_m2
        * (1 - np.exp(-width_ms / coil.time_constant_ms))
        * np.exp(-since_off / coil.time_constant_ms)
    )
    shown = np.abs(decaying_dipole(flown, cycle, time_ms)[:, axis])
    assert shown == pytest.approx(expected, rel=1e-9) and shown[0] > 1e-3


@pytest.mark.parametrize("cycle", [0, 310, 899])
def test_any_cycle_can_be_magnified(flown, cycle):
    assert f"cycle {cycle} under" in cycle_figure(flown, cycle).get_suptitle()


@pytest.mark.parametrize("cycle", [-1, 900])
def test_a_cycle_that_was_not_flown(flown, cycle):
    with pytest.raises(IndexError, match=str(cycle)):
        cycle_figure(flown, cycle)


def test_inline_svg_keeps_text_and_has_ids_of_its_own(flown):
    name = 'id="x" <b>$a$ & url(#c)'
    svg = inline_svg(duty_figure(with_mission(flown, name=name)), "abc", 'a "label" & <more>')
    root = ElementTree.fromstring(svg)
    assert root.attrib["aria-label"] == 'a "label" & <more>'
    assert any(name in (text.text or "") for text in root.iter("text"))
    ids = [element.attrib["id"] for element in root.iter() if "id" in element.attrib]
    assert len(ids) == len(set(ids)) and all(i == "abc" or i.startswith("abc-") for i in ids)
    used = [value for e in root.iter() for value in e.attrib.values() if "#abc-" in value]
    assert used and all(value.rpartition("#")[2].rstrip(")") in ids for value in used)
    assert "xmlns" not in svg and "metadata" not in svg and "http" not in svg


@pytest.mark.parametrize("kind", ["svg", "png"])
def test_saved_figures_have_the_same_bytes_each_time(flown, tmp_path, kind, monkeypatch):
    plots = [plot for plot in PLOTS if plot.name in ("cycle", "samples")]
    monkeypatch.setattr(figures, "PLOTS", plots)
    paths = save_figures(flown, tmp_path / "new" / "folder", kind)
    assert [path.name for path in paths] == [f"{plot.name}.{kind}" for plot in plots]
    for path, plot in zip(paths, plots, strict=True):
        again = io.BytesIO()
        save(plot.draw(flown), again, kind)
        assert again.getvalue() == path.read_bytes()
    assert b"<dc:date>" not in paths[0].read_bytes()


def test_settings_of_the_user_have_no_influence_and_stay(flown):
    plain = inline_svg(duty_figure(flown), "a", "a")
    with matplotlib.rc_context(
        {"axes.grid": True, "font.size": 20, "svg.fonttype": "path", "lines.linewidth": 7}
    ):
        before = dict(matplotlib.rcParams)
        assert inline_svg(duty_figure(flown), "a", "a") == plain
        assert dict(matplotlib.rcParams) == before


def test_bins_lose_no_extreme():
    values = np.zeros(1000)
    values[[17, 633]] = 5.0, -3.0
    bins = Bins(1000, 40)
    assert bins.greatest(values).max() == 5.0 and bins.least(values).min() == -3.0
    assert (bins.mean(values) * np.diff(bins.edges)).sum() == pytest.approx(2.0)
    assert list(bins.spans(values != 0)) == [(0, 25), (625, 650)]
    assert len(bins.starts) == 40 and len(Bins(7, 40).starts) == 7
