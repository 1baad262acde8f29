"""Floor 0 beside units: how records show themselves, checks used everywhere, channels, and the wiring."""

from __future__ import annotations

import dataclasses
import subprocess
import sys
from html.parser import HTMLParser

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from flatplan import wiring
from flatplan.channels import CHANNELS, Channels
from flatplan.records import Record, of_type, one_of, quoted
from flatplan.units import KINDS


@dataclasses.dataclass(frozen=True, repr=False)
class Pair(Record):
    """A record with a title and rows made of whatever text it is given."""

    title: str
    rows: tuple[tuple[str, str], ...] = ()

    def _title(self) -> str:
        return self.title

    def _rows(self) -> tuple[tuple[str, str], ...]:
        return self.rows


class _Reader(HTMLParser):
    """Tags met, and the text between them."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: list[str] = []
        self.words: list[str] = []

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)

    def handle_data(self, data):
        self.words.append(data)


def _read(page: str) -> _Reader:
    reader = _Reader()
    reader.feed(page)
    reader.close()
    return reader


def test_text_form_lines_up():
    assert repr(Pair("A record", (("length", "140 m"), ("flow area", "6000 m²")))) == "A record\n  length     140 m\n  flow area  6000 m²"


def test_a_record_without_rows_is_its_title():
    class Plain(Record):
        pass

    assert repr(Plain()) == "Plain"
    assert _read(Plain()._repr_html_()).words == ["Plain"]


def test_html_form_escapes_what_it_shows():
    hostile = '<script>alert("1")</script> & <b>bold</b>'
    page = Pair(hostile, ((hostile, hostile),))._repr_html_()
    reader = _read(page)
    assert reader.tags == ["table", "caption", "tr", "th", "td"]
    assert "".join(reader.words) == hostile * 3


@given(st.text(alphabet=st.characters(exclude_categories=["Cs", "Cc"])), st.text(alphabet='<>&"/ab='))
def test_html_form_keeps_any_text_and_adds_no_tag(title, value):
    reader = _read(Pair(title, ((value, value),))._repr_html_())
    assert reader.tags == ["table", "caption", "tr", "th", "td"]
    assert "".join(reader.words) == title + value * 2


def test_every_record_of_the_ground_shows_itself(medium, rock, fluid):
    for record in (medium, rock, fluid, medium.face, medium.well):
        words = _read(record._repr_html_()).words
        assert words[0] == repr(record).splitlines()[0]
        assert all(word in repr(record) for word in words)
    assert "140 m" in repr(medium)
    assert "40 mD" in repr(rock)
    assert "0.5 cP" in repr(fluid)


# --- checks ----------------------------------------------------------------------------------------


def test_of_type():
    assert of_type(3, int, "n", "a whole number") == 3
    with pytest.raises(TypeError, match="^n: got str; it takes a whole number.$"):
        of_type("3", int, "n", "a whole number")


@pytest.mark.parametrize("value", ["C", "", None, 1, ["A"], np.array(["A", "B"]), float("nan")])
def test_one_of(value):
    assert one_of("A", ("A", "B"), "which") == "A"
    with pytest.raises(ValueError, match=r"^which: got .+; it takes one of 'A', 'B'\.$"):
        one_of(value, ("A", "B"), "which")


@given(st.text() | st.binary() | st.lists(st.integers()) | st.floats())
def test_what_an_error_quotes_is_one_short_line(value):
    words = quoted(value)
    assert len(words) <= 60
    assert words.splitlines() == [words]


def test_quoting_cuts_long_values_at_once():
    assert quoted("m" * 10**7) == "'" + "m" * 56 + "..."
    assert quoted(np.arange(6).reshape(2, 3)) == "array([[0, 1, 2], [3, 4, 5]])"
    assert quoted(10**6000) == "a int"


# --- channels --------------------------------------------------------------------------------------


def _channels(n: int) -> Channels:
    names = [field.name for field in dataclasses.fields(Channels)]
    return Channels(**{name: np.linspace(1.0, 2.0, n) * (i + 1) for i, name in enumerate(names) if name != "target_kind"})


def test_channels_name_every_output_once():
    names = [field.name for field in dataclasses.fields(Channels)]
    assert names[0] == "times"
    assert sorted(names[1:]) == sorted([*CHANNELS, "target_kind"])
    assert all(kind in KINDS and words for kind, words in CHANNELS.values())


def test_channels_show_their_ranges():
    assert repr(_channels(1)).splitlines()[0] == "Channels at 1 time"
    assert repr(_channels(3)).splitlines()[0] == "Channels at 3 times"
    assert len(repr(_channels(3)).splitlines()) == 1 + len(CHANNELS)
    assert repr(_channels(0)) == "Channels at 0 times"
    held = repr(dataclasses.replace(_channels(3), target_kind="rate"))
    assert "rate through the target face" in held and "target pressure" not in held


def test_channels_are_frozen_and_compare_without_an_array_as_truth():
    one, other = _channels(3), _channels(3)
    assert one == one
    assert one != other
    assert len({one, other}) == 2
    with pytest.raises(dataclasses.FrozenInstanceError, match="times"):
        one.times = np.zeros(3)


# --- wiring ----------------------------------------------------------------------------------------


def test_a_role_is_played_by_the_module_named_for_it(monkeypatch):
    monkeypatch.setattr(wiring, "_MODULES", {})
    wiring.provide("text", "string")
    assert wiring.provider("text").digits == "0123456789"
    wiring.provide("text", "textwrap")
    assert wiring.provider("text").dedent(" a") == "a"
    with pytest.raises(KeyError, match="nobody"):
        wiring.provider("nobody")


def test_a_role_loads_its_module_only_when_asked():
    code = (
        "import sys; from flatplan import wiring; wiring.provide('role', 'colorsys'); "
        "assert 'colorsys' not in sys.modules; wiring.provider('role'); assert 'colorsys' in sys.modules"
    )
    subprocess.run([sys.executable, "-c", code], check=True, timeout=120)
