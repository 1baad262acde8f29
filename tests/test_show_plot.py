"""Figures: units on every axis, limits drawn, nothing overlapping, colours that can be told apart, no trace left behind."""

from __future__ import annotations

import itertools
import re
import subprocess
import sys
from functools import cache

import matplotlib as mpl
import media
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from matplotlib.figure import Figure
from show_job import composite, held, held_stated, job, layer, plain

import flatplan as fp
from flatplan.decide import Limits
from flatplan.field import steps
from flatplan.flat import Target, feedforward
from flatplan.numeric import Steps, confirm
from flatplan.show import plot
from flatplan.show.axes import spread_out
from flatplan.show.figure import NotebookFigure, image, panels
from flatplan.show.style import COLOURS, GREY, INK, house_style

UNIT = re.compile(r" \[(.+)\]$")


@cache
def down() -> object:
    """A move down, which takes fluid out."""
    return feedforward(layer(), Target(start="21 MPa").move(by="-10 bar", over="20 h", easing=0.4))


@cache
def slight() -> object:
    """A change of 100 Pa on 21 MPa, whose ticks would get an offset by default."""
    return feedforward(layer(), Target(start="21 MPa").move(by="100 Pa", over="3 d"))


# name -> what makes the figure
FIGURES = {
    "plan": lambda system: plot(job().plan, units=system),
    "plan with everything": lambda system: plot(job().plan, limits=job().verdict, steps=job().steps, check=job().check, units=system),
    "plan, tight limits": lambda system: plot(
        plain(),
        limits=Limits(max_rate="1 m^3/h", min_rate=0, max_bottomhole_pressure="22 MPa", min_bottomhole_pressure="20.9 MPa"),
        units=system,
    ),
    "plan, far limits": lambda system: plot(
        plain(),
        limits=Limits(max_rate="90 m^3/h", min_rate="-90 m^3/h", max_bottomhole_pressure="40 MPa", min_bottomhole_pressure="1 MPa"),
        units=system,
    ),
    "plan downwards": lambda system: plot(down(), limits=Limits(min_rate=0), units=system),
    "slight plan": lambda system: plot(slight(), units=system),
    "plan of a held face": lambda system: plot(held(), check=confirm(held()), units=system),
    "plan of a held face, stated": lambda system: plot(
        held_stated(), limits=Limits(max_rate="3 m^3/h", max_bottomhole_pressure="213 bar"), check=confirm(held_stated()), units=system
    ),
    "plan of a held face, pumped": lambda system: plot(held(), steps=steps(held(), every="6 h"), units=system),
    "composite profile": lambda system: plot(composite(), kind="profile", units=system),
    "profile": lambda system: plot(job().plan, kind="profile", units=system),
    "profile at moments": lambda system: plot(plain(), kind="profile", times=["6 h", "1 d", "2 d"], units=system),
    "pumped steps": lambda system: plot(job().steps, check=job().steps_check, limits=job().limits, units=system),
    "pumped steps, own check": lambda system: plot(steps(plain(), every="1 h"), units=system),
    "steps": lambda system: plot(
        Steps(edges=["0 h", "6 h", "1 d"], rates=["2 L/s", "-0.5 L/s"]), limits=Limits(max_rate="3 L/s"), units=system
    ),
    "check": lambda system: plot(job().check, units=system),
    "check of steps": lambda system: plot(job().steps_check, units=system),
    "check of a held face": lambda system: plot(confirm(held()), units=system),
    "channels": lambda system: plot(job().plan.at(np.linspace(0.0, 3e5, 200)), limits=job().limits, units=system),
}
# the units that may stand on an axis of each system
LABELS = {"SI": {"MPa", "L/s", "m", "Pa"}, "metric": {"bar", "m³/h", "m", "Pa"}, "field": {"psi", "bbl/d", "ft"}}


@cache
def drawn(name: str, system: str = "metric") -> Figure:
    figure = FIGURES[name](system)
    with house_style():
        figure.canvas.draw()
    return figure


def texts(axes: object) -> list[object]:
    return [text for text in axes.texts if text.get_visible() and text.get_text()]


# --- axes ------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "system"),
    [(name, system) for name in FIGURES for system in LABELS if system != "SI" or name in ("plan", "slight plan", "check", "steps")],
)
def test_a_figure_can_be_read(name, system):
    """One test for all that is asked of every figure, because drawing is what takes the time."""
    figure = drawn(name, system)
    every_axis_has_its_unit(figure, LABELS[system])
    numbers_stand_in_full(figure)
    words_keep_clear_of_one_another(figure)


@pytest.mark.parametrize("geometry", media.GEOMETRIES)
def test_a_medium_is_drawn(geometry):
    figure = plot(media.medium(geometry, "leaky", "skin and storage", "leaking"))
    assert UNIT.search(figure.axes[-1].get_xlabel())[1] == "m"
    assert [UNIT.search(axes.get_ylabel())[1] for axes in figure.axes[1:]] == ["mD/cP", "10⁻⁶/bar"]
    assert {"target face: leaky", "sandface and well with resistance and wellbore storage"} <= {
        text.get_text() for text in texts(figure.axes[0])
    }


def test_radii_are_read_on_a_logarithmic_axis_where_they_differ_much():
    axes = drawn("composite profile").axes[0]
    assert axes.get_xscale() == "log"
    assert axes.get_xlim() == pytest.approx((250.0, 0.1))
    assert UNIT.search(axes.get_xlabel())[1] == "m" and axes.get_xlabel().startswith("radius")
    line = axes.get_lines()[-1]
    radius = line.get_xdata()
    assert radius[[0, -1]] == pytest.approx([250.0, 0.1]) and np.all(np.diff(radius) < 0.0)
    # the steep rise in the tight zone at the well fills a good part of the figure
    assert np.mean(radius < 4.0) > 0.3
    near = plot(feedforward(media.medium("radial outward"), Target(start="21 MPa").move(by="5 bar", over="4 d")), kind="profile")
    assert near.axes[0].get_xscale() == "log"
    layered = plot(plain(), kind="profile").axes[0]
    assert layered.get_xscale() == "linear" and layered.get_xlabel().startswith("distance")


def test_zone_joins_are_thin_lines():
    def upright(figure: Figure) -> list[float]:
        lines = [line for line in figure.axes[0].get_lines() if len(line.get_xdata()) == 2 and np.ptp(line.get_xdata()) == 0.0]
        assert all(line.get_linewidth() < 1.0 for line in lines)
        return [float(line.get_xdata()[0]) for line in lines]

    assert upright(drawn("composite profile")) == pytest.approx([60.0, 4.0])
    assert upright(drawn("profile")) == []
    varying = feedforward(media.medium("varying rock"), Target(start="21 MPa").move(by="5 bar", over="2 d"))
    assert upright(plot(varying, kind="profile")) == []


def test_the_sketch_names_zones_and_not_pieces():
    words = " ".join(text.get_text() for text in texts(plot(composite().medium).axes[0]))
    assert [f"zone {i}" in words for i in (1, 2, 3, 4)] == [True, True, True, False]
    assert words.count("leaks") == 2
    varying = [text.get_text() for text in texts(plot(media.medium("varying rock")).axes[0])]
    assert "α 0.451 to 1.35 m²/s" in varying and not any("zone" in word for word in varying)
    assert "α 26800 ft²/h" in [text.get_text() for text in texts(plot(layer(), units="field").axes[0])]


def test_a_sketch_of_many_zones_stays_readable():
    zones = [fp.Zone(length=10.0, area=100.0, rock=media.ROCK, fluid=media.WATER, leakage=media.BED) for _ in range(40)]
    figure = plot(fp.zoned(zones))
    with house_style():
        figure.canvas.draw()
    words_keep_clear_of_one_another(figure)


def test_a_held_face_shows_pressures_and_both_rates():
    figure = drawn("plan of a held face, stated")
    upper, lower = figure.axes
    assert (upper.get_ylabel(), lower.get_ylabel()) == ("pressure [bar]", "rate [m³/h]")
    lines = {line.get_label(): line for line in (*upper.get_lines(), *lower.get_lines())}
    at = lines["bottomhole"].get_xdata()
    np.testing.assert_allclose(lines["bottomhole"].get_ydata()[[0, -1]] > 209.9, True)
    np.testing.assert_allclose(lines["target face, wanted"].get_ydata(), held_stated().target.pressure(at * 86400.0) * 3600.0, atol=1e-9)
    assert "target, simulated" in lines
    assert drawn("plan of a held face").axes[0].get_ylabel() == "pressure change [bar]"


def every_axis_has_its_unit(figure: Figure, allowed: set[str]) -> None:
    for axes in figure.axes:
        assert UNIT.search(axes.get_ylabel())[1] in allowed
    assert UNIT.search(figure.axes[-1].get_xlabel())[1] in {"d", "h", "min"} | allowed
    assert sum(bool(axes.get_xlabel()) for axes in figure.axes) == 1


def numbers_stand_in_full(figure: Figure) -> None:
    """No offset, no power of ten at the end of an axis, no exponent in a tick; neither too many ticks nor two alike."""
    for axes in figure.axes:
        for axis in (axes.xaxis, axes.yaxis):
            assert axis.get_offset_text().get_text() == ""
            low, high = axis.get_view_interval()
            ticks = [text.get_text() for at, text in zip(axis.get_ticklocs(), axis.get_ticklabels(), strict=False) if low <= at <= high]
            assert all(re.fullmatch(r"−?[\d.]+|10[⁻⁰¹²³⁴⁵⁶⁷⁸⁹]+", tick) for tick in ticks), ticks
            assert len(set(ticks)) == len(ticks) <= 10
        assert len(ticks) >= 3


def words_keep_clear_of_one_another(figure: Figure) -> None:
    """No words lie on others, and all lie on the page."""
    renderer = figure.canvas.get_renderer()
    boxes = [(text.get_text(), mpl.text.Text.get_window_extent(text, renderer)) for axes in figure.axes for text in texts(axes)]
    boxes += [(axes.get_ylabel(), axes.yaxis.label.get_window_extent(renderer)) for axes in figure.axes]
    for (one, a), (other, b) in itertools.combinations(boxes, 2):
        shared = max(0.0, min(a.x1, b.x1) - max(a.x0, b.x0)) * max(0.0, min(a.y1, b.y1) - max(a.y0, b.y0))
        assert shared <= 0.03 * min(a.width * a.height, b.width * b.height), f"{one!r} lies on {other!r}"
    for text, box in boxes:
        assert box.x0 >= 0.0 and box.x1 <= figure.bbox.x1 + 1.0 and box.y0 >= 0.0 and box.y1 <= figure.bbox.y1 + 1.0, text


@pytest.mark.parametrize(("seconds", "label"), [(86400.0 * 12, "d"), (86400.0 * 2.9, "h"), (7200.0, "min"), (86400.0 * 4000, "d")])
def test_time_is_in_the_unit_people_speak_of(seconds, label):
    figure = plot(Steps(edges=[0.0, 0.5 * seconds, seconds], rates=[1e-3, 2e-3]))
    assert figure.axes[0].get_xlabel() == f"time since start [{label}]"


def test_panels_share_their_time():
    upper, lower = drawn("plan").axes
    assert upper.get_xlim() == lower.get_xlim() == (0.0, 12.0)
    assert upper.get_shared_x_axes().joined(upper, lower)


# --- what is drawn ---------------------------------------------------------------------------------


def line(axes: object, label: str) -> object:
    return next(entry for entry in axes.lines if entry.get_label() == label)


def test_curves_are_the_plan():
    upper, lower = drawn("plan", "field").axes
    found = line(upper, "target pressure, wanted")
    wanted = job().target.pressure(found.get_xdata() * 86400.0)
    np.testing.assert_allclose(found.get_ydata() * 6894.757293168361, wanted, rtol=1e-13)
    rate = line(lower, "planned rate")
    np.testing.assert_allclose(
        rate.get_ydata() * 0.158987294928 / 86400.0, job().plan.rate(rate.get_xdata() * 86400.0), rtol=1e-12, atol=1e-16
    )


def test_equal_pressures_are_one_line():
    """Without skin and resistance, bottomhole and sandface pressure are one curve under one name."""
    labels = [entry.get_label() for entry in plot(plain()).axes[0].lines]
    assert "bottomhole and sandface" in labels and "sandface" not in labels
    assert {"bottomhole", "sandface"} <= {entry.get_label() for entry in drawn("plan").axes[0].lines}


def test_limits_are_drawn_where_they_are_and_named_with_their_number():
    upper, lower = drawn("plan with everything").axes
    for axes, value, words in (
        (upper, 230.0, "largest allowed bottomhole pressure 230 bar"),
        (lower, 3.0, "largest allowed rate 3 m³/h"),
        (lower, -1.0, "smallest allowed rate −1 m³/h"),
    ):
        lines = [
            entry for entry in axes.lines if np.allclose(entry.get_ydata(), value, rtol=1e-12) and entry.get_color() == COLOURS["limit"]
        ]
        assert len(lines) == 1, words
        assert words in [text.get_text() for text in texts(axes)]
        assert axes.get_ylim()[0] < value < axes.get_ylim()[1]


def test_limits_off_the_axis_are_named_at_its_edge():
    upper, lower = drawn("plan, far limits").axes
    assert "▲ largest allowed bottomhole pressure 400 bar, off this axis" in [text.get_text() for text in texts(upper)]
    assert "▼ smallest allowed rate −90 m³/h, off this axis" in [text.get_text() for text in texts(lower)]
    assert upper.get_ylim()[1] < 250.0


def test_back_flow_is_marked_and_only_where_there_is_any():
    assert "back-flow" in [text.get_text() for text in texts(drawn("plan").axes[1])]
    one_way = plot(Steps(edges=[0.0, 3600.0, 7200.0], rates=[1e-3, 0.0]))
    assert "back-flow" not in [text.get_text() for text in texts(one_way.axes[0])]


def test_stairs_carry_the_rates():
    upper, _ = drawn("pumped steps").axes
    stairs = next(patch for patch in upper.patches if patch.get_label() == "rate as pumped")
    np.testing.assert_allclose(stairs.get_data().values / 3600.0, job().steps.rates, rtol=1e-12)
    np.testing.assert_allclose(stairs.get_data().edges * 86400.0, job().steps.edges, rtol=1e-12)


def test_departures_are_the_checks():
    axes = drawn("pumped steps").axes[1]
    found = line(axes, "simulated less wanted").get_ydata()
    assert np.max(np.abs(found)) * 1e5 == pytest.approx(job().steps_check.target_error, rel=1e-9)
    assert drawn("check").axes[1].get_yscale() == "log"
    assert drawn("pumped steps").axes[1].get_yscale() == "linear"


def test_a_profile_ends_in_the_target_and_in_the_sandface():
    axes = drawn("profile at moments").axes[0]
    assert [entry.get_label() for entry in axes.lines] == ["day 0.25", "day 1", "day 2"]
    at = plain().at([21600.0, 86400.0, 172800.0])
    np.testing.assert_allclose([entry.get_ydata()[0] * 1e5 for entry in axes.lines], at.target_pressure, rtol=1e-12)
    np.testing.assert_allclose([entry.get_ydata()[-1] * 1e5 for entry in axes.lines], at.sandface_pressure, rtol=1e-12)


def test_axes_of_ones_own_are_used():
    figure = Figure(figsize=(8, 6))
    own = figure.subplots(2, 1)
    assert plot(plain(), axes=list(own), title="up") is figure
    assert own[0].get_title(loc="left") == "up" or own[0].get_title() == "up"
    assert own[0].get_xlabel() and own[1].get_xlabel()  # not shared: each says its time
    single = Figure().subplots()
    assert plot(plain(), kind="profile", axes=single) is single.figure


# --- style -----------------------------------------------------------------------------------------


def linear(colour: str) -> np.ndarray:
    value = np.array([int(colour[i : i + 2], 16) for i in (1, 3, 5)]) / 255.0
    return np.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)


def contrast_with_white(colour: str) -> float:
    """Ratio of luminances, with 0.05 for stray light, as the usual accessibility rule has it."""
    return 1.05 / (float(linear(colour) @ [0.2126, 0.7152, 0.0722]) + 0.05)


def lab(rgb: np.ndarray) -> np.ndarray:
    xyz = np.array([[0.4124564, 0.3575761, 0.1804375], [0.2126729, 0.7151522, 0.072175], [0.0193339, 0.119192, 0.9503041]]) @ rgb
    f = [v ** (1 / 3) if v > 0.008856 else 7.787 * v + 16 / 116 for v in xyz / [0.95047, 1.0, 1.08883]]
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


# Linear maps of what is left to see when one kind of cone is missing (Machado, Oliveira and Fernandes 2009, severity 1).
SIGHT = {
    "normal": np.eye(3),
    "no red cones": np.array([[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]]),
    "no green cones": np.array([[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.01182, 0.04294, 0.968881]]),
    "no blue cones": np.array([[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.3039]]),
}


@pytest.mark.parametrize("colour", [*COLOURS.values(), GREY, INK])
def test_colours_can_be_read_on_white(colour):
    assert contrast_with_white(colour) >= 4.5


@pytest.mark.parametrize("sight", SIGHT)
def test_colours_differ_for_every_eye(sight):
    seen = {name: lab(np.clip(SIGHT[sight] @ linear(colour), 0.0, 1.0)) for name, colour in COLOURS.items()}
    for one, other in itertools.combinations(seen, 2):
        assert np.linalg.norm(seen[one] - seen[other]) > 20.0, f"{one} and {other}"


def test_lines_differ_by_dash_too():
    lines = [entry for entry in drawn("plan").axes[0].lines if not entry.get_label().startswith("_")]
    assert len({str(entry._unscaled_dash_pattern) for entry in lines}) == len(lines) == 3


def test_settings_and_pyplot_are_left_alone():
    before = dict(mpl.rcParams)
    figure = plot(plain())
    image(figure, "png")
    assert dict(mpl.rcParams) == before
    code = "import sys; sys.path.insert(0, 'tests'); import show_job; from flatplan.show import plot"
    code += "; plot(show_job.plain()); print('matplotlib.pyplot' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, timeout=120, check=True)
    assert done.stdout.strip() == "False"


def test_a_figure_shows_itself_in_a_notebook():
    from IPython.core.formatters import DisplayFormatter

    data, _ = DisplayFormatter().format(plot(plain()))
    assert data["image/png"]
    assert plot(plain())._repr_png_().startswith(b"\x89PNG")


def test_the_same_figure_gives_the_same_file():
    files = [image(plot(plain()), "svg") for _ in range(2)]
    assert files[0] == files[1]
    assert b"<dc:date>" not in files[0]
    assert b"<text" not in files[0]  # words are shapes: no font is needed


@given(st.lists(st.floats(0.0, 1.0), min_size=1, max_size=12), st.floats(0.001, 0.08))
def test_labels_are_spread_in_order_and_within_bounds(wanted, gap):
    places = spread_out(wanted, gap)
    order = np.argsort(wanted, kind="stable")
    assert np.all(np.diff(np.array(places)[order]) >= min(gap, 1.0 / max(len(wanted) - 1, 1)) - 1e-12)
    assert min(places) >= -1e-12 and max(places) <= 1.0 + 1e-12
    if len(wanted) > 1 and np.min(np.diff(np.sort(wanted))) >= gap:
        np.testing.assert_allclose(places, wanted, rtol=0.0, atol=1e-12)


# --- refusals --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("call", "kind", "sentence"),
    [
        (lambda: plot("plan"), TypeError, "^thing: got str; it takes a medium, a plan, terms, steps, channels or a check.$"),
        (lambda: plot(plain(), kind="pie"), ValueError, "^kind: got 'pie'; it takes one of 'history', 'profile'.$"),
        (lambda: plot(plain(), units="cgs"), ValueError, "^units: got 'cgs'; it takes one of"),
        (lambda: plot(plain(), limits={"max_rate": 1}), TypeError, "^limits: got dict; it takes Limits or a verdict.$"),
        (lambda: plot(plain(), steps=[1.0]), TypeError, "^steps: got list; it takes the steps of a plan.$"),
        (lambda: plot(plain(), times=[1.0]), ValueError, "^times: does not go with a history of a plan; it takes check, limits, steps.$"),
        (
            lambda: plot(plain(), kind="profile", limits=Limits()),
            ValueError,
            "^limits: does not go with a profile of a plan; it takes times.$",
        ),
        (lambda: plot(job().check, kind="profile"), ValueError, "^kind: got 'profile' for Check; only a plan has a profile.$"),
        (
            lambda: plot(job().check, limits=Limits()),
            ValueError,
            "^limits: does not go with a figure of Check; it takes none of the overlays.$",
        ),
        (lambda: plot(plain(), steps=job().steps), ValueError, "^steps: belong to a plan of another target.$"),
        (lambda: plot(job().steps, check=job().check), ValueError, "^check: is one of the plan; for steps it takes a check of the steps"),
        (
            lambda: plot(plain(), kind="profile", times=range(13)),
            ValueError,
            "^times: got 13; a profile is readable with at most 12 moments.$",
        ),
        (lambda: plot(plain(), title=3), TypeError, "^title: got int; it takes text.$"),
        (lambda: plot(plain(), axes=Figure().subplots()), ValueError, "^axes: got 1; this figure has 2 panels.$"),
        (lambda: plot(plain(), axes=[1, 2]), TypeError, "^axes: got int; it takes matplotlib axes.$"),
        (lambda: plot(plain().at([0.0])), ValueError, "^thing: got channels at 1 time; a figure over time takes at least two.$"),
    ],
)
def test_what_cannot_be_drawn(call, kind, sentence):
    with pytest.raises(kind, match=sentence):
        call()


def test_a_new_figure_is_ours():
    figure, axes = panels(None, (1.0, 2.0), 4.0)
    assert isinstance(figure, NotebookFigure) and len(axes) == 2
