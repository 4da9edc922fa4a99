"""The page of a sensor plan: whole, well formed, escaped, and with nothing from elsewhere."""

from __future__ import annotations

import base64
import hashlib
import re
from datetime import UTC, datetime
from html.parser import HTMLParser

import numpy as np
import pytest

from ocean_sound.errors import InputError, OutputError
from ocean_sound.profile import Profile
from ocean_sound.reports import sensors_report, write_report
from ocean_sound.reports.page import facts, page, plain, section, table
from ocean_sound.sensors.area import Area
from ocean_sound.sensors.coverage import Hearing, Noise, Target
from ocean_sound.sensors.hearing import Receiver
from ocean_sound.sensors.losses import LossSettings
from ocean_sound.sensors.planning import Task, Wanted, place_sensors
from ocean_sound.sensors.sites import Site
from ocean_sound.sensors.waters import Member

HOSTILE = '<script>alert("1")</script>\'&amp;<img src="http://example.org/x" onerror=go()>'
VOID = {"meta", "img", "br", "hr", "link", "input"}
WHEN = datetime(2026, 3, 1, 12, 0, tzinfo=UTC)


def spherical(section, *, source_depth, frequency, ranges, depths, **_):
    slant = np.hypot(np.asarray(ranges)[:, None], np.asarray(depths)[None, :] - source_depth)
    return 20.0 * np.log10(slant) + 2e-3 * slant


@pytest.fixture(scope="module")
def plan():
    """In which every name is hostile."""
    area = Area.box(-17.1, -17.0, 179.93, -179.93, spacing=2000.0, depths=[10.0, 60.0], bathymetry=100.0)
    waters = tuple(
        Member(f"{name}{HOSTILE}", (Profile([0.0, 100.0], [1500.0, 1500.0], id=HOSTILE, equation=HOSTILE),), group=name)
        for name in ("summer", "winter")
    )
    task = Task(
        area=area, members=waters, bathymetry=100.0,
        hearing=Hearing(Target(150.0), Receiver(10.0, 500.0, integration_time=0.5), Noise([45.0, 55.0])),
        settings=LossSettings(12e3, 8000.0, np.array([5.0, 30.0, 60.0, 90.0]), bearings=8, ranges=40, kind=None),
        candidates=[Site(f"{HOSTILE}{i}", -17.05, east, 50.0) for i, east in enumerate((179.96, -179.96))],
        existing=[Site("old", -17.02, -179.99, 40.0)], wanted=Wanted(1),
    )  # fmt: skip
    return place_sensors(task, engine=spherical)


class Reader(HTMLParser):
    """Elements, their attributes and the text of a page; asserts that tags close in order."""

    def __init__(self):
        super().__init__(convert_charrefs=True)
        self.open, self.elements, self.text = [], [], []

    def handle_starttag(self, tag, attrs):
        names = [name for name, _ in attrs]
        assert len(names) == len(set(names))
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        assert self.open, f"</{tag}> closes nothing"
        assert self.open.pop() == tag

    def handle_data(self, data):
        if not self.open or self.open[-1] != "style":
            self.text.append(data)


def read(text):
    reader = Reader()
    reader.feed(text)
    reader.close()
    assert reader.open == []
    return reader


@pytest.fixture(scope="module")
def text(plan):
    return sensors_report(plan, title=HOSTILE, remark=HOSTILE, sources=[HOSTILE], notes=[HOSTILE], written=WHEN)


def test_the_page_is_well_formed(text):
    reader = read(text)
    assert text.startswith("<!DOCTYPE html>")
    tags = [tag for tag, _ in reader.elements]
    for single in ("html", "head", "title", "body", "main", "h1"):
        assert tags.count(single) == 1
    names = [attrs["id"] for _, attrs in reader.elements if "id" in attrs]
    assert len(names) == len(set(names))
    links = [attrs["href"] for tag, attrs in reader.elements if tag == "a"]
    assert links == [f"#{name}" for name in names]


def test_nothing_runs_and_nothing_comes_from_elsewhere(text):
    reader = read(text)
    allowed = {
        "html", "head", "meta", "title", "style", "body", "header", "nav", "ul", "li", "a", "main", "section", "h1",
        "h2", "h3", "p", "div", "table", "caption", "thead", "tbody", "tr", "th", "td", "figure", "figcaption", "img",
        "footer",
    }  # fmt: skip
    assert {tag for tag, _ in reader.elements} <= allowed
    for tag, attrs in reader.elements:
        assert not [name for name in attrs if name.startswith("on")]
        for name in ("src", "href"):
            if name in attrs:
                assert attrs[name].startswith("data:image/png;base64," if tag == "img" else "#")
    assert "url(" not in text
    assert "@import" not in text
    policy = next(attrs["content"] for tag, attrs in reader.elements if "http-equiv" in attrs)
    assert policy.startswith("default-src 'none'")


def test_hostile_names_are_shown_as_they_are(text):
    shown = "".join(read(text).text)
    # title and heading, remark, credit, note; two waters, their casts and equations; one sensor
    assert shown.count('<script>alert("1")</script>') >= 11
    assert "<script" not in text
    assert '<img src="http' not in text


def test_figures_are_pictures_with_words_for_them(text):
    pictures = [attrs for tag, attrs in read(text).elements if tag == "img"]
    assert len(pictures) == 4
    for attrs in pictures:
        content = base64.b64decode(attrs["src"].partition(",")[2], validate=True)
        assert content.startswith(b"\x89PNG\r\n\x1a\n")
        assert len(attrs["alt"]) > 20


def test_the_numbers_are_those_of_the_plan(plan, text):
    shown = " ".join("".join(read(text).text).split())
    told = plan.summary()
    assert f"over {100 * told['covered']['1']:.1f} % of the area" in shown
    assert "150 dB re 1 µPa at 1 m, at 12000 Hz" in shown
    assert "threshold 10 dB (half are detected) in a band of 500 Hz, over 0.5 s" in shown
    assert "Level seabed at 100 m, absorbs all sound" in shown
    assert "Written 2026-03-01 12:00 UTC by ocean_sound" in shown
    for caution in ("marine mammals", "safety of navigation", "Diving, lifting and mooring", "as good as the water"):
        assert caution in shown


def test_print_and_small_screens_are_thought_of(text):
    style = re.search(r"<style>(.*?)</style>", text, re.DOTALL)[1]
    assert "@media print" in style
    assert "@media (max-width" in style
    assert 'name="viewport"' in text


def test_inputs_come_with_their_checksums(plan, tmp_path):
    file = tmp_path / "<b>&cast.csv"
    file.write_bytes(b"depth,speed\n")
    text = sensors_report(plan, inputs=[file], figures=False)
    shown = "".join(read(text).text)
    assert "<b>&cast.csv" in shown
    assert hashlib.sha256(b"depth,speed\n").hexdigest() in shown
    assert str(tmp_path) not in text
    with pytest.raises(InputError, match=r"none\.csv: can't be read"):
        sensors_report(plan, inputs=[tmp_path / "none.csv"], figures=False)


def test_without_pictures(plan):
    assert "<img" not in sensors_report(plan, figures=False)


def test_the_same_plan_makes_the_same_page(plan, text):
    again = sensors_report(plan, title=HOSTILE, remark=HOSTILE, sources=[HOSTILE], notes=[HOSTILE], written=WHEN)
    assert again == text


def test_writing(tmp_path):
    goal = tmp_path / "plan.html"
    write_report(goal, "<!DOCTYPE html>é")
    assert goal.read_text(encoding="utf-8") == "<!DOCTYPE html>é"
    with pytest.raises(OutputError, match="exists already"):
        write_report(goal, "other")
    write_report(goal, "other", replace=True)
    assert goal.read_text(encoding="utf-8") == "other"
    with pytest.raises(InputError, match=r"plan\.txt: a report is a page of HTML; name it \.html"):
        write_report(tmp_path / "plan.txt", "x")
    assert [path.name for path in tmp_path.iterdir()] == ["plan.html"]


@pytest.mark.parametrize("character", ["\u202e", "\x00", "\x1b", "\ufeff", "\ud800", "\u2066"])
def test_characters_that_deceive_are_left_out(character):
    assert plain(f"a{character}b") == "ab"
    whole = page(f"a{character}b", [], [section("one", character, facts([(character, character)]))], character)
    assert character not in whole
    whole.encode("utf-8")


def test_tables_refuse_rows_of_another_length():
    with pytest.raises(ValueError, match=r"shorter|longer"):
        table(["a", "b"], [["1"]], caption="c")
