"""The series term by term, as shown: columns, units, and a figure that can be read."""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
from benchmarks.jobs import one_bump
from matplotlib.figure import Figure
from show_job import composite, held, job, plain
from test_show_plot import line, numbers_stand_in_full, texts, words_keep_clear_of_one_another

import flatplan as fp
from flatplan.decide import Limits
from flatplan.show import plot, report_html, table
from flatplan.show.style import house_style

# name -> the terms
TERMS = {
    "rate": lambda: plain().terms(),
    "pressure": lambda: job().plan.terms("bottomhole_pressure"),
    "volume": lambda: composite().terms("injected_volume"),
    "target": lambda: plain().terms("target_pressure"),
    "held face": lambda: held().terms("target_pressure"),
    "terms that cancel": lambda: one_bump(8.0, 1.25).plan.terms(),
    "many terms": lambda: one_bump(3.0, 1.9).plan.terms(),
    "few terms": lambda: one_bump(0.02, 1.5, 1e-3).plan.terms("sandface_pressure"),
    "rough": lambda: one_bump(4.0, 1.7, 0.1).plan.terms("sandface_pressure"),
    "fine": lambda: one_bump(0.5, 1.5, 1e-13).plan.terms(),
}


@cache
def drawn(name: str) -> Figure:
    figure = plot(TERMS[name]())
    with house_style():
        figure.canvas.draw()
    return figure


# --- table -----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("channel", "system", "unit", "factor"),
    [
        ("injection_rate", "metric", "m³/h", 1.0 / 3600.0),
        ("bottomhole_pressure", "field", "psi", 6894.757293168361),
        ("injected_volume", "SI", "m³", 1.0),
    ],
)
def test_one_row_a_term(channel, system, unit, factor):
    terms = job().plan.terms(channel)
    found = table(terms, units=system)
    assert found["term [-]"].tolist() == terms.order.tolist()
    words = terms.words + (" (change)" if "pressure" in channel else "")
    for name, values in (("largest size", terms.size), ("bound", terms.bound), ("bound on all later terms", terms.tail)):
        np.testing.assert_allclose(found[f"{words}, {name} [{unit}]"] * factor, values, rtol=1e-13, atol=0.0)
        np.testing.assert_allclose(found[f"{name} over peak [-]"], values / terms.peak, rtol=1e-13, atol=0.0)


def test_terms_that_only_some_moves_use():
    target = fp.Target(start="21 MPa").move(by="1 MPa", over="20 d").move(by="1 MPa", over="1 d")
    alike = plain().terms()
    assert table(alike)["in the plan"].tolist() == ["used"] * (alike.cut + 1) + ["not used"] * (alike.order[-1] - alike.cut)
    plan = fp.feedforward(plain().medium, target)
    fewest, cut = sorted(plan.series.terms)
    assert fewest < cut
    column = table(plan.terms())["in the plan"].tolist()
    assert column[: cut + 2] == ["used"] * (fewest + 1) + ["used in some moves"] * (cut - fewest) + ["not used"]


def test_no_spacing_for_terms():
    with pytest.raises(ValueError, match="^every: got '6 h' for Terms; only a plan"):
        table(plain().terms(), every="6 h")


# --- figure ----------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", TERMS)
def test_the_figure_can_be_read(name):
    figure, terms = drawn(name), TERMS[name]()
    (axes,) = figure.axes
    if terms.cut:
        numbers_stand_in_full(figure)
    words_keep_clear_of_one_another(figure)
    assert axes.get_ylabel() == f"size over the peak\n{terms.words} [-]" and axes.get_xlabel() == "term k"
    assert axes.get_yscale() == "log"
    legend = axes.get_legend()
    assert [text.get_text() for text in legend.get_texts()] == [
        "largest size of the term", "bound on the term", "bound on all later terms together",
    ]  # fmt: skip
    # neither words nor legend on a curve: every point is left of the words or below them
    renderer = figure.canvas.get_renderer()
    boxes = [text.get_window_extent(renderer) for text in texts(axes)] + [legend.get_window_extent(renderer)]
    assert all(figure.bbox.x0 <= box.x0 and box.x1 <= figure.bbox.x1 for box in boxes)
    for label in (text.get_text() for text in legend.get_texts()):
        x, y = line(axes, label).get_data()
        fine = np.linspace(0.0, x[-1], 2000)
        with np.errstate(divide="ignore", over="ignore"):
            on_page = axes.transData.transform(np.column_stack([fine, np.exp(np.interp(fine, x, np.log(y)))]))
        for box in boxes:
            inside = (on_page[:, 0] > box.x0) & (on_page[:, 0] < box.x1) & (on_page[:, 1] > box.y0) & (on_page[:, 1] < box.y1)
            assert not np.any(inside), label


def test_curves_are_the_terms():
    terms = plain().terms()
    (axes,) = drawn("rate").axes
    for label, values in (
        ("largest size of the term", terms.size),
        ("bound on the term", terms.bound),
        ("bound on all later terms together", terms.tail),
    ):
        x, y = line(axes, label).get_data()
        assert np.array_equal(x, terms.order)
        np.testing.assert_allclose(y[1:], values[1:] / terms.peak, rtol=1e-14)
    words = [text.get_text() for text in texts(axes)]
    assert "tolerance 1×10⁻⁹" in words
    assert any(word.startswith(f"last term used: k = {terms.cut}\nleft out: at most\n") for word in words)
    upright = [entry for entry in axes.lines if np.ptp(entry.get_xdata()) == 0.0 and len(entry.get_xdata()) == 2]
    assert [float(entry.get_xdata()[0]) for entry in upright] == [terms.cut + 0.5]
    assert "nothing is left out" in drawn("target").axes[0].texts[-1].get_text()


def test_curves_differ_in_more_than_colour():
    (axes,) = drawn("rate").axes
    assert line(axes, "largest size of the term").get_linestyle() == "None" and line(axes, "largest size of the term").get_marker() == "o"
    assert line(axes, "bound on the term").get_linestyle() == "-"
    assert line(axes, "bound on all later terms together").get_linestyle() == "--"


@pytest.mark.parametrize("name", TERMS)
def test_the_axis_ends_a_few_decades_below_the_tolerance(name):
    terms, (axes,) = TERMS[name](), drawn(name).axes
    low, high = axes.get_ylim()
    share = terms.left_out / terms.peak
    assert 0.99e-16 * terms.tolerance <= low <= 1.01e-4 * terms.tolerance
    assert low == pytest.approx(1e-4 * share) or share == 0.0 or low == pytest.approx(1e-16 * terms.tolerance)
    assert high > max(1.0, float(np.max(terms.size)) / terms.peak)
    assert axes.get_xlim()[0] < 0.0 and axes.get_xlim()[1] > terms.cut + 0.5


def test_what_does_not_go_with_terms():
    with pytest.raises(ValueError, match="^limits: does not go with a figure of Terms; it takes none of the overlays.$"):
        plot(plain().terms(), limits=Limits())
    with pytest.raises(ValueError, match="^kind: got 'profile' for Terms; only a plan has a profile.$"):
        plot(plain().terms(), kind="profile")
    own = Figure().subplots()
    assert plot(plain().terms(), axes=own, title="the series") is own.figure and own.get_title(loc="left") == "the series"


def test_the_report_shows_them_with_the_certificate():
    text = report_html(plain())
    part = text[text.index('<section id="certificate">') :]
    part = part[: part.index("</section>")]
    assert part.count("<figure>") == 1
    last = plain().certificate.terms
    assert f"behind the cut after term {last} all that is left" in part
    assert f"on a logarithmic axis, falling until the last one used, term {last};" in part
