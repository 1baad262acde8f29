"""The report: a whole, valid, self-contained page with everything on it, or no page at all."""

from __future__ import annotations

import base64
import os
import re
import shutil
import subprocess
import tempfile
import xml.etree.ElementTree as ET
from functools import cache
from html.parser import HTMLParser
from itertools import pairwise
from pathlib import Path

import media
import numpy as np
import pytest
import sympy
from show_job import composite, held, held_stated, job, plain

import flatplan as fp
from flatplan.decide import Limits, assess
from flatplan.field import steps
from flatplan.numeric import confirm
from flatplan.show import files, report, report_html
from flatplan.show.cautions import CAUTIONS, IN_THE_FIELD, LEFT_OUT, STOP_WHEN
from flatplan.show.formula import formula_svg, lines_of
from flatplan.show.page import element
from flatplan.show.report_series import coefficients, symbolic_terms

VOID = {"meta", "img", "br", "hr", "link", "input", "col", "area", "base", "embed", "source", "track", "wbr"}
HOSTILE = "<script>alert(\"1\")</script> & 'it' </title><img src=x onerror=y>"


class Page(HTMLParser):
    """Reads a page strictly: every element is closed, in order; keeps elements with their attributes, and text."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.stack: list[str] = []
        self.elements: list[tuple[str, dict[str, str]]] = []
        self.words: list[str] = []
        self.inside: dict[str, list[str]] = {}
        self.declaration = ""
        self.feed(text)
        self.close()
        assert not self.stack, f"not closed: {self.stack}"

    def handle_decl(self, decl: str) -> None:
        self.declaration = decl

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        names = [name for name, _ in attrs]
        assert len(names) == len(set(names)), f"{tag}: an attribute twice"
        self.elements.append((tag, dict(attrs)))
        if tag == "p":
            assert "p" not in self.stack, "a paragraph in a paragraph"
        if tag in ("div", "table", "ul", "ol", "section", "figure", "h1", "h2", "h3", "dl"):
            assert "p" not in self.stack, f"{tag} in a paragraph"
        if tag not in VOID:
            self.stack.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        raise AssertionError(f"<{tag}/>: HTML has no such form")

    def handle_endtag(self, tag: str) -> None:
        assert self.stack and self.stack[-1] == tag, f"</{tag}> inside {self.stack[-3:]}"
        self.stack.pop()

    def handle_data(self, data: str) -> None:
        if "style" not in self.stack:
            self.words.append(data)
        for tag in self.stack[-1:]:
            self.inside.setdefault(tag, []).append(data)

    def all(self, tag: str) -> list[dict[str, str]]:
        return [attributes for name, attributes in self.elements if name == tag]

    @property
    def text(self) -> str:
        return " ".join("".join(self.words).split())


@cache
def written(name: str) -> str:
    """A report by name, as text."""
    j = job()
    calls = {
        "everything": lambda path: report(j.plan, j.verdict, j.check, j.steps, steps_check=j.steps_check, path=path),
        "field": lambda path: report(j.plan, j.verdict, j.check, j.steps, steps_check=j.steps_check, path=path, units="field"),
        "SI": lambda path: report(j.plan, j.verdict, j.check, j.steps, steps_check=j.steps_check, path=path, units="SI"),
        "bare": lambda path: report(plain(), path=path),
        "hostile": lambda path: report(plain(), path=path, title=HOSTILE, scenario=f"{HOSTILE}\n\nsecond", notes=HOSTILE, every="1 d"),
        "held, stated": lambda path: report(
            held_stated(), path=path, **whole(held_stated(), Limits(max_bottomhole_pressure="22 MPa"), "1 h")
        ),
        "composite": lambda path: report(
            composite(), path=path, **whole(composite(), Limits(max_bottomhole_pressure="300 bar"), "12 h", "field")
        ),
        "varying": lambda path: report(varying(), path=path),
        "held": lambda path: report(
            held(), assess(held(), Limits(max_rate="3 L/s")), confirm(held()), steps(held(), every="6 h"), path=path
        ),
    }
    with tempfile.TemporaryDirectory() as folder:
        path = calls[name](Path(folder) / "plan.html")
        assert os.listdir(folder) == ["plan.html"]
        return path.read_text(encoding="utf-8")


NAMES = ["everything", "field", "SI", "bare", "hostile", "held", "held, stated", "composite", "varying"]


def whole(plan, limits, every, system="metric"):
    """What a page with everything on it takes."""
    pumped = steps(plan, every=every)
    return {
        "verdict": assess(plan, limits, units=system), "check": confirm(plan), "steps": pumped, "steps_check": confirm(pumped),
        "units": system,
    }  # fmt: skip


@cache
def varying():
    return fp.feedforward(media.medium("varying rock"), fp.Target(start="21 MPa").move(to="22.5 MPa", over="3 d"))


# --- the page --------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", NAMES)
def test_the_page_is_valid_and_accessible(name):
    text = written(name)
    page = Page(text)
    assert text.startswith("<!DOCTYPE html>\n") and page.declaration == "DOCTYPE html"
    assert page.all("html") == [{"lang": "en"}]
    assert page.all("meta")[0] == {"charset": "utf-8"}
    assert text.index("charset") < 1024
    assert len(page.all("title")) == len(page.all("h1")) == 1
    assert page.inside["title"] == page.inside["h1"] and page.inside["title"][0].strip()
    identifiers = [attributes["id"] for _, attributes in page.elements if "id" in attributes]
    assert len(identifiers) == len(set(identifiers)) >= 10
    assert page.all("img") and all(image["alt"] for image in page.all("img"))
    formulas = sum(attributes.get("class") == "formula" for attributes in page.all("div"))
    assert len(page.all("figcaption")) == len(page.all("figure")) == len(page.all("img")) - formulas
    assert len(page.all("caption")) == len(page.all("table"))
    assert all(head.get("scope") in ("row", "col") for head in page.all("th"))
    rank = [int(tag[1]) for tag, _ in page.elements if re.fullmatch(r"h[1-6]", tag)]
    assert all(b - a <= 1 for a, b in pairwise(rank)), "a heading level is skipped"


@pytest.mark.parametrize("name", NAMES)
def test_the_page_needs_nothing_from_outside(name):
    text = written(name)
    page = Page(text)
    assert len(text.encode()) < 1_000_000
    for tag, attributes in page.elements:
        for key in ("src", "href", "action", "data", "srcset", "poster"):
            assert key not in attributes or attributes[key].startswith(("data:image/svg+xml;base64,", "#")), f"{tag} {key}"
        assert not any(key.startswith("on") for key in attributes)
    assert not {tag for tag, _ in page.elements} & {"script", "link", "iframe", "object", "embed", "base", "form"}
    style = "".join(page.inside["style"])
    assert "url(" not in style and "@import" not in style and "<" not in style
    assert "http://" not in text and "https://" not in text


@pytest.mark.parametrize("name", NAMES)
def test_pictures_are_whole_and_fetch_nothing(name):
    for image in Page(written(name)).all("img"):
        svg = base64.b64decode(image["src"].split(",", 1)[1], validate=True)
        root = ET.fromstring(svg)
        assert root.tag == "{http://www.w3.org/2000/svg}svg"
        for entry in root.iter():
            for key, value in entry.attrib.items():
                assert not key.endswith("href") or value.startswith("#")


@pytest.mark.parametrize("name", NAMES)
def test_cautions_and_limits_of_the_model_are_always_there(name):
    text = Page(written(name)).text
    for sentence in (*CAUTIONS, *LEFT_OUT, *IN_THE_FIELD, *STOP_WHEN):
        assert " ".join(sentence.split()) in text
    assert f"flatplan {fp.__version__}" in text
    assert "[LarocheMartinRouchon2000]" in text


# --- what it says ----------------------------------------------------------------------------------


def test_the_numbers_come_first():
    """The first paragraph: from where to where, by when, how much, how fast."""
    j = job()
    first = re.search(r'<p class="lead">(.*?)</p>', written("everything"), re.DOTALL)[1]
    back = -j.steps.volumes[j.steps.volumes < 0.0].sum()
    into = j.steps.volumes[j.steps.volumes > 0.0].sum()
    for words in (
        "140 m from the well", "from 210.00 bar to 225.00 bar within 3 d (by day 3)",
        "stay there for 5 d", "fall to 218.00 bar within 4 d (by day 12)",
        f"inject {into:.1f} m³ over 12 d, in 48 steps of 6 h", f"at up to {j.steps.rates.max() * 3600:.3f} m³/h",
        f"let {back:.2f} m³ flow back",
        f"Bottomhole pressure reaches {j.steps_check.channels.bottomhole_pressure.max() / 1e5:.2f} bar",
    ):  # fmt: skip
        assert words in first, words


def test_units_of_the_reader():
    j = job()
    field, si = Page(written("field")).text, Page(written("SI")).text
    top = j.steps.rates.max()
    assert f"at up to {top / 0.158987294928 * 86400:.1f} bbl/d" in field
    assert "from 3045.8 psi to 3263.3 psi" in field
    assert f"at up to {top * 1000:.4f} L/s" in si
    assert "from 21.000 MPa to 22.500 MPa" in si


def test_every_finding_stands_there_with_reason_and_remedy():
    text = Page(written("everything")).text.replace("−", "-")
    for finding in job().verdict.findings:
        assert finding.title in text
        if "e-" not in finding.reason:
            assert " ".join(finding.reason.split()) in text
        assert finding.remedy in text
    assert text.count("✗ not met") == len(job().verdict.failing) == 2


def test_a_plan_that_fails_is_not_to_be_pumped():
    text = Page(written("everything")).text
    assert "Do not pump this plan as it stands: not realizable (2 findings not met: smallest injection rate" in text
    assert "rate as pumped not confirmed (target off by up to 1.2 % of the change, 1 % allowed)" in text
    assert "✓ Plan confirmed" in text


def test_a_good_plan_has_no_warning(tmp_path):
    plan = plain()
    pumped = steps(plan, every="1 h")
    limits = Limits(max_rate="4 m^3/h", min_rate="-1 m^3/h", max_bottomhole_pressure="24 MPa")
    verdict = assess(plan, limits)
    text = report(plan, verdict, confirm(plan), pumped, steps_check=confirm(pumped), path=tmp_path / "a.html").read_text(encoding="utf-8")
    assert "Do not pump" not in text and 'class="warning"' not in text and "✗" not in Page(text).text
    assert [word in Page(text).text for word in ("✓ Realizable", "✓ Plan confirmed", "✓ Rate as pumped confirmed")] == [True] * 3


def test_steps_that_break_a_limit_which_the_plan_keeps(tmp_path):
    """Skin makes bottomhole pressure jump with the rate: the verdict on the smooth plan does not cover it."""
    j = job()
    top, as_pumped = j.verdict["max_bottomhole_pressure"].value, j.steps_check.channels.bottomhole_pressure.max()
    verdict = assess(j.plan, Limits(max_bottomhole_pressure=0.5 * (top + as_pumped)))
    assert verdict.realizable
    text = report(j.plan, verdict, j.check, j.steps, steps_check=j.steps_check, path=tmp_path / "a.html").read_text(encoding="utf-8")
    assert "✗ Bottomhole pressure as pumped beyond its limit" in Page(text).text
    assert "bottomhole pressure as pumped beyond its limit (225.61 bar against" in Page(text).text


def test_what_is_missing_is_said():
    text = Page(written("bare")).text
    assert "This plan was not assessed" in text
    assert "Neither the plan nor the rate as pumped was run on the independent model." in text
    assert "No bottomhole limit was stated for this plan: state one before pumping." in text
    assert "– Not assessed" in text and "– Plan not confirmed" in text


def cells(text: str) -> list[list[str]]:
    body = re.search(r'<table class="rates">.*?<tbody>(.*?)</tbody>', text, re.DOTALL)[1]
    return [[re.sub("<.*?>", "", cell) for cell in re.findall(r"<t[hd].*?</t[hd]>", row)] for row in re.findall("<tr>.*?</tr>", body)]


def test_the_rate_table_is_the_steps():
    rows = cells(written("everything"))
    j = job()
    assert len(rows) == len(j.steps.rates)
    assert rows[4][:3] == ["5", "1 d 00:00", "1 d 06:00"]
    rates = [float(row[3].replace("−", "-")) for row in rows]
    np.testing.assert_allclose(rates, j.steps.rates * 3600.0, rtol=0.0, atol=5.001e-4)
    total = [float(row[5].replace("−", "-")) for row in rows]
    np.testing.assert_allclose(total, j.plan.at(j.steps.edges[1:]).injected_volume, rtol=0.0, atol=5.001e-3)
    # volumes of rounded rates stay true to the plan: the digits shown are enough
    np.testing.assert_allclose(np.cumsum(np.array(rates) * 6.0), total, rtol=0.0, atol=0.05)


def test_without_steps_the_plan_is_read_evenly():
    rows = cells(written("hostile"))
    assert [row[0] for row in rows] == ["0 d 00:00", "1 d 00:00", "2 d 00:00", "3 d 00:00"]
    assert rows[-1][-1] == "225.00"


def test_a_table_too_long_for_a_page_is_thinned_and_says_so(tmp_path):
    pumped = steps(plain(), every="2 min")
    text = report(plain(), steps=pumped, path=tmp_path / "a.html").read_text(encoding="utf-8")
    assert "Of 2160 rows only one in 2 is printed here" in text
    assert len(cells(text)) == 1080
    assert len(text.encode()) < 1_000_000


def test_a_medium_that_leaks_is_told_apart():
    """Zones, volumes at the end of each move and hold, and the rate that must go on."""
    plan, page = composite(), Page(written("composite"))
    rate = plan.medium.equilibrium(0.5e6).rate / 0.158987294928 * 86400.0
    assert f"After the last step pump on at a steady {rate:.4g} bbl/d for as long as the last level is to be kept" in page.text
    assert f"After that the level is kept by a steady {rate:.4g} bbl/d" in page.text
    assert plan.rate([plan.end])[0] == pytest.approx(plan.medium.equilibrium(0.5e6).rate, rel=1e-8)
    leaked = plan.volumes(["6 d", "10 d", "15 d", "16 d"]).leaked / 0.158987294928
    rows = re.search(r"Where the fluid is.*?<tbody>(.*?)</tbody>", written("composite"), re.DOTALL)[1]
    rows = [re.findall(r">([^<]*)</t[hd]>", row) for row in re.findall("<tr>.*?</tr>", rows)]
    assert [row[0] for row in rows] == ["move 1", "hold", "move 2", "hold"]
    np.testing.assert_allclose([float(row[-1]) for row in rows], leaked, rtol=1e-3)
    assert "gone through the confining bed. Injected" in page.text
    assert "permeability [mD] 40 350 6" in " ".join(re.sub("<.*?>", " ", written("composite")).split())
    # nothing of it where nothing leaks
    for name in ("everything", "varying"):
        assert "pump on" not in written(name) and "Where the fluid is" not in written(name) and "Steady rate" not in written(name)


def test_a_level_that_needs_no_rate_is_said_to():
    medium = media.medium("slab", leakage="leaking")
    target = fp.Target(start="21 MPa").move(by="5 bar", over="2 d").hold("1 d").move(by="-5 bar", over="2 d")
    text = Page(report_html(fp.feedforward(medium, target, tolerance=1e-6))).text
    assert "After the end of the plan nothing needs to be pumped: the plan ends at the level it started from." in text


def test_a_stated_pressure_of_a_held_face_is_carried_through():
    page = Page(written("held, stated"))
    plan = held_stated()
    top = confirm(steps(plan, every="1 h")).channels.bottomhole_pressure.max()
    assert 21.0e6 < top < 22.0e6
    assert f"Bottomhole pressure reaches {top / 1e5:.3f} bar" in page.text
    assert "held at 210 bar" in page.text and "✗" not in page.text
    assert "Bottomhole pressure changes by up to" in Page(written("held")).text
    assert "bottomhole pressure change at the end [bar]" in Page(written("held")).text


def test_a_held_face_beyond_its_limit_as_pumped():
    """Long steps make the simulated bottomhole pressure differ from the plan's: it is compared with the limit, absolute."""
    plan = held_stated()
    check = confirm(steps(plan, every="1 h"))
    check.channels.bottomhole_pressure[100] = 24.0e6  # as if a step had overshot
    verdict = assess(plan, Limits(max_bottomhole_pressure="22 MPa"))
    text = Page(report_html(plan, verdict, steps=steps(plan, every="1 h"), steps_check=check)).text
    assert verdict.realizable
    assert "bottomhole pressure as pumped beyond its limit (240.000 bar against 220.000 bar" in text


def test_findings_speak_the_units_of_the_page():
    assert "The sentences quote" not in written("composite")
    assert assess(plain(), units="field").units == "field" and job().verdict.units == "metric"
    assert "The sentences quote metric units." in written("field")
    assert "The sentences quote SI units." in report_html(plain(), assess(plain(), units="SI"))


def test_the_path_is_sketched_with_words_for_it():
    words = [image["alt"] for image in Page(written("composite")).all("img") if image["alt"].startswith("Sketch")]
    assert len(words) == 1 and "zone 2 from radius 196.9 ft to 13.12 ft" in words[0]


def test_varying_rock_is_a_short_table():
    text = written("varying")
    rows = re.search(r"The rock at the places.*?<tbody>(.*?)</tbody>", text, re.DOTALL)[1]
    rows = [[float(v) for v in re.findall(r">([^<]*)</t[hd]>", row)] for row in re.findall("<tr>.*?</tr>", rows)]
    wanted = np.column_stack([media.PROFILE.at, media.PROFILE.permeability / 9.869233e-16, media.PROFILE.porosity])
    np.testing.assert_allclose(rows, wanted, rtol=5.01e-4)
    assert "there is no closed form in symbols" in text
    long = fp.RockProfile(permeability=lambda x: 4e-14 * (1.0 + x / 100.0), porosity=0.1, compressibility=5e-10)
    medium = fp.slab(length=120.0, area=5000.0, rock=long, fluid=media.WATER)
    text = report_html(fp.feedforward(medium, fp.Target(start="21 MPa").move(by="5 bar", over="3 d"), tolerance=1e-6))
    assert "Of 33 places 13 are printed" in text


# --- the series ------------------------------------------------------------------------------------


@pytest.mark.parametrize("geometry", ["slab", "radial inward", "radial outward", "spherical"])
@pytest.mark.parametrize("leakage", ["tight", "leaking"])
@pytest.mark.parametrize("face", ["sealed", "held"])
def test_the_formulas_are_the_coefficients(geometry, leakage, face):
    """What is printed in symbols and in numbers, evaluated, is what the plan uses."""
    medium = media.medium(geometry, face, "stated resistance", leakage)
    exact = medium.coefficients("injection_rate", 3)
    written_out = symbolic_terms(medium)
    assert bool(written_out) == (leakage == "tight" or geometry == "slab")
    for k, (expression, lines) in written_out.items():
        assert float(expression.evalf()) == pytest.approx(exact[k], rel=1e-9, abs=1e-12 * abs(exact[1]))
        assert 1 <= len(lines) <= 3
    scale = 1.0 if face == "held" else 1e5 * 3600.0
    np.testing.assert_allclose(coefficients(medium, "metric"), exact * scale / 86400.0 ** np.arange(4), rtol=1e-12)


def test_the_series_can_be_read():
    page = Page(written("bare"))
    formulas = [image["alt"] for image in page.all("img") if image.get("style")]
    assert formulas == ["0", "L*T/alpha", "L^3*T/(6*alpha^2)", "L^5*T/(120*alpha^3)"]
    c_1 = plain().medium.coefficients("injection_rate", 1)[1] * 1e5 * 3600.0 / 86400.0
    assert f"c₁ y′ {c_1:.6g}" in " ".join(re.sub("<.*?>", " ", written("bare")).split())
    assert "hydraulic diffusivity k/(φ μ cₜ), 0.69258 m²/s" in page.text
    assert "too long for a page; medium.series gives them" in written("composite")


def test_what_is_drawn_is_the_formula():
    """Wide sums break between terms, a term wider than the page has no formula, and a picture is as large as it says."""
    a = sympy.symbols("a_0:30")
    lines = lines_of(sum(symbol / (7 * symbol + 3) for symbol in a[:12]))
    assert 1 < len(lines) <= 3 and not lines[0].startswith("+") and all(line[0] in "+-" for line in lines[1:])
    assert lines_of(sympy.prod(symbol + 1 for symbol in a)) is None
    assert lines_of(sympy.log(a[0])) == ["\\ln{\\left(a_{0} \\right)}"]
    svg, wide, tall = formula_svg("\\dfrac{L^{3} T}{6 \\alpha^{2}}")
    root = ET.fromstring(svg)
    assert float(root.attrib["width"].removesuffix("pt")) == pytest.approx(wide, abs=0.01)
    assert 10.0 < tall < 60.0


@pytest.mark.parametrize("geometry", ["radial outward", "spherical", "zoned radial", "varying rock"])
def test_every_medium_has_its_report(geometry, tmp_path):
    medium = media.medium(geometry, "storing", "skin and storage", "leaking")
    plan = fp.feedforward(medium, fp.Target(start="21 MPa").move(by="10 bar", over=3.0 * medium.travel_time, easing=0.5), tolerance=1e-6)
    Page(report(plan, path=tmp_path / "a.html").read_text(encoding="utf-8"))


# --- what users write ------------------------------------------------------------------------------


def test_hostile_words_stay_words():
    text = written("hostile")
    page = Page(text)
    assert "<script" not in text and "onerror=y>" not in text.replace("onerror=y&gt;", "")
    assert page.inside["h1"] == page.inside["title"] == [HOSTILE]
    assert page.text.count(HOSTILE) == 4  # title, heading, scenario, notes
    assert "<p>second</p>" in text


def test_attributes_are_escaped_too():
    assert element("img", alt='"><b>') == '<img alt="&quot;&gt;&lt;b&gt;">'
    assert element("p", 1.5, "<", element("b", "&")) == "<p>1.5&lt;<b>&amp;</b></p>"


def test_the_page_as_text_is_the_file():
    assert report_html(plain()) == written("bare")


# --- whole or not at all ---------------------------------------------------------------------------


def test_a_failure_leaves_no_file(tmp_path, monkeypatch):
    def fail(*_: object) -> None:
        raise OSError("the disk is full")

    monkeypatch.setattr(files.os, "replace", fail)
    with pytest.raises(OSError, match="^the disk is full$"):
        report(plain(), path=tmp_path / "plan.html")
    assert os.listdir(tmp_path) == []


def test_parts_of_another_plan_are_refused(tmp_path):
    j, path = job(), tmp_path / "plan.html"
    path.write_text("old")
    cases = [
        (lambda: report("plan", path=path), TypeError, "^plan: got str; it takes a plan made by feedforward...$"),
        (lambda: report(plain(), j.verdict, path=path), ValueError, "^verdict: belongs to another plan; the page is about one plan.$"),
        (lambda: report(plain(), steps=j.steps, path=path), ValueError, "^steps: belongs to another plan"),
        (lambda: report(j.plan, check=confirm(held()), path=path), ValueError, "^check: belongs to another plan"),
        (lambda: report(j.plan, check=j.steps_check, path=path), ValueError, "^check: is a check of the steps; it takes confirm.plan.[.]$"),
        (
            lambda: report(j.plan, steps_check=j.check, path=path),
            ValueError,
            "^steps_check: is a check of the plan; it takes confirm.steps.[.]$",
        ),
        (lambda: report(j.plan, j.check, path=path), TypeError, "^verdict: got Check; it takes what assess.. gives.$"),
        (lambda: report(j.plan, path=path, units="oil"), ValueError, "^units: got 'oil'; it takes one of"),
        (lambda: report(j.plan, path=path, title=7), TypeError, "^title: got int; it takes text.$"),
        (
            lambda: report(j.plan, steps=j.steps, every="1 h", path=path),
            ValueError,
            "^every: does not go with steps=, which have a spacing of their own.$",
        ),
        (lambda: report(j.plan, path=path, every="1 m"), ValueError, "^every: got '1 m', which is not a time"),
        (lambda: report(j.plan, path=tmp_path), IsADirectoryError, "^path: got "),
    ]
    for call, kind, sentence in cases:
        with pytest.raises(kind, match=sentence):
            call()
    assert path.read_text() == "old"
    assert os.listdir(tmp_path) == ["plan.html"]


# --- in a browser ----------------------------------------------------------------------------------

BROWSER = next((found for name in ("chromium", "chromium-browser", "google-chrome") if (found := shutil.which(name))), None)


@pytest.mark.skipif(BROWSER is None, reason="no headless browser here")
def test_a_browser_reads_the_same_page(tmp_path):
    """What the browser made of the page: the same elements in the same order, so nothing had to be repaired."""
    path = tmp_path / "plan.html"
    path.write_text(written("everything"), encoding="utf-8")
    flags = ["--headless", "--no-sandbox", "--disable-gpu", "--disable-background-networking", f"--user-data-dir={tmp_path / 'profile'}"]
    done = subprocess.run([BROWSER, *flags, "--dump-dom", path.as_uri()], capture_output=True, text=True, timeout=120, check=True)
    ours, theirs = Page(written("everything")), Page(done.stdout)
    assert [tag for tag, _ in theirs.elements] == [tag for tag, _ in ours.elements]
    assert theirs.text == ours.text
