"""Pictures of soundings: the numbers on their axes are those of the results, and the words can be read."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
import xarray as xr

from ocean_sound.demo.survey import synthetic_survey
from ocean_sound.errors import InputError
from ocean_sound.figures.interval import interval_figure
from ocean_sound.figures.orders import orders_figure
from ocean_sound.figures.passport import passport_figure
from ocean_sound.figures.refraction import refraction_figure
from ocean_sound.figures.swath import swath_figure
from ocean_sound.profile import Profile
from ocean_sound.soundings import refraction_errors
from ocean_sound.soundings.choosing import Scales
from ocean_sound.soundings.columns import PingBlock
from ocean_sound.soundings.correcting import Corrector
from ocean_sound.soundings.interval import CastInterval, Growth
from ocean_sound.soundings.orders import read_orders
from ocean_sound.soundings.passport import Contribution, passport
from ocean_sound.soundings.reach import LIMITED_BY, largest_angle

ORDERS = read_orders()
ANGLES, DEPTHS = np.linspace(0.0, 75.0, 31), np.linspace(5.0, 100.0, 39)


def axes_named(figure, name):
    (axes,) = (axes for axes in figure.axes if axes.get_label() == name)
    return axes


def drawn(axes, gid):
    (found,) = (one for one in (*axes.lines, *axes.collections, *axes.patches) if one.get_gid() == gid)
    return found


# Before and after


@pytest.fixture(scope="module")
def truth():
    survey = synthetic_survey(seed=2, kind="internal tide", pings=30, beams=21, lines=1)
    return survey.truth.assign(survey.soundings[["latitude", "longitude"]])


@pytest.fixture(scope="module")
def wrong(truth):
    """Too deep by 1 cm per 100 m of distance across; one sounding lost."""
    found = truth.copy(deep=True)
    found["depth"] = truth["depth"] + 1e-4 * np.abs(truth["across_track_distance"])
    found["depth"][5, 7] = np.nan
    return found


def test_the_difference_of_a_swath(wrong, truth, assert_readable):
    figure = swath_figure(wrong, truth, names=("first cast", "all casts"), title="Bank", remark="invented data")
    mesh = axes_named(figure, "difference").collections[0]
    values = mesh.get_array()
    across = 0.5 * (mesh.get_coordinates()[1:, 0, 1] + mesh.get_coordinates()[:-1, 0, 1])
    row = int(np.abs(across - 100.0).argmin())
    assert np.asarray(values[row].compressed()) == pytest.approx(-0.01 * across[row], abs=0.05)  # cm, now shallower
    assert values.shape[1] == 30
    assert values[:, 5].mask.sum() > values[:, 4].mask.sum()  # the lost sounding leaves a gap
    assert mesh.norm.vmin == -mesh.norm.vmax
    x = axes_named(figure, "difference").get_xlim()
    assert x[1] - x[0] == pytest.approx(12.0, rel=0.01)  # km: the line
    mean = drawn(axes_named(figure, "mean difference"), "mean")
    assert mean.get_xdata() == pytest.approx(-0.01 * np.abs(mean.get_ydata()), abs=0.05)
    depths = axes_named(figure, "key of depths")
    assert depths.get_ylim()[0] > depths.get_ylim()[1]  # deeper is lower
    assert_readable(figure)


def test_errors_of_a_swath_where_the_truth_is_known(wrong, truth, assert_readable):
    figure = swath_figure(wrong, truth, truth=truth)
    before, after = (axes_named(figure, name).collections[0].get_array() for name in ("before", "after"))
    assert before.max() == pytest.approx(0.01 * float(np.abs(truth["across_track_distance"]).max()), rel=0.05)
    assert np.abs(after).max() == 0.0
    assert axes_named(figure, "mean before").lines
    assert_readable(figure)


def test_a_large_swath_is_thinned_and_an_empty_one_drawn():
    across = np.tile(np.linspace(-50.0, 50.0, 5), (3000, 1))
    swath = xr.Dataset({"depth": (("ping", "beam"), np.full(across.shape, 30.0)),
                        "across_track_distance": (("ping", "beam"), across)})  # fmt: skip
    figure = swath_figure(swath, swath)
    assert axes_named(figure, "before").collections[0].get_array().shape[1] == 800
    assert axes_named(figure, "difference").get_xlabel() == "ping"
    nothing = swath.isel(ping=slice(0, 3)) * np.nan
    swath_figure(nothing, nothing)


def test_a_swath_must_be_the_same_soundings(wrong, truth):
    with pytest.raises(InputError, match=r"before has \(30, 21\) pings and beams, after \(29, 21\)"):
        swath_figure(wrong, truth.isel(ping=slice(0, 29)))
    with pytest.raises(InputError, match=r"after: depth on \(ping, beam\) is missing"):
        swath_figure(wrong, truth.drop_vars("depth"))
    with pytest.raises(InputError, match=r"truth: depth of \(30, 21\) pings and beams is needed; found \(2, 21\)"):
        swath_figure(wrong, truth, truth=truth.isel(ping=slice(0, 2)))


# Refraction


def test_refraction_and_the_limits_of_orders(assert_readable):
    used, true = (Profile([0, 20, 21, 110], [1500 + top, 1500 + top, 1500, 1500]) for top in (6, 0))
    errors = refraction_errors(used, true, angles=ANGLES, depths=DEPTHS, flat_array=True)
    figure = refraction_figure(errors, used="A", true="B", orders=ORDERS, remark="invented data")
    axes = axes_named(figure, "depth error")
    special = ORDERS["Special"]
    line = drawn(axes, "Special")
    for angle, depth in line.get_paths()[0].vertices[::5]:
        there = errors["depth_error"].interp(angle=angle, sounding_depth=depth)
        assert abs(float(there)) == pytest.approx(special.tvu(depth), rel=0.05)
    assert "as large as order Special allows" in [text.get_text() for text in figure.legends[0].get_texts()]
    assert "transducer at 0 m" in figure.texts[1].get_text()
    assert_readable(figure)


def test_refraction_within_all_limits_needs_no_key(assert_readable):
    water = Profile([0, 110], [1500, 1501])
    near = Profile([0, 110], [1500, 1501.1])
    errors = refraction_errors(near, water, angles=ANGLES, depths=DEPTHS)
    figure = refraction_figure(errors, orders=ORDERS)
    assert not figure.legends
    assert_readable(figure)


# Orders


def uncertainty(size):
    tvu = size * DEPTHS / np.cos(np.radians(ANGLES))[:, None] ** 2
    return xr.Dataset(
        {"tvu_95": (("angle", "depth"), tvu), "thu_95": (("angle", "depth"), 2.0 * tvu)},
        {"angle": ANGLES, "depth": DEPTHS},
    )


def test_where_orders_end(assert_readable):
    table = uncertainty(0.002)
    figure = orders_figure(table, ORDERS, remark="cast A")
    over = axes_named(figure, "angle and depth")
    for name, order in (("1b, 1a" if name == "1b" else name, each) for name, each in ORDERS.items() if name != "1a"):
        reach = largest_angle(order, ANGLES, DEPTHS, table["tvu_95"], table["thu_95"])
        ends = np.where(reach.limited_by == LIMITED_BY.index("not_limited"), np.nan, reach.angle)
        if np.isfinite(ends).any():
            assert drawn(over, name).get_xdata() == pytest.approx(ends, nan_ok=True)
            assert drawn(over, name).get_ydata() == pytest.approx(DEPTHS)
    beside = axes_named(figure, "limits")
    assert drawn(beside, "Special").get_ydata() == pytest.approx(ORDERS["Special"].tvu(DEPTHS))
    assert drawn(beside, "1b, 1a").get_ydata() == pytest.approx(ORDERS["1a"].tvu(DEPTHS))
    assert drawn(beside, "75°").get_ydata() == pytest.approx(table["tvu_95"].values[-1])
    assert over.get_ylim()[0] > over.get_ylim()[1]
    assert "does not average out" in figure.texts[1].get_text()
    assert_readable(figure)


@pytest.mark.parametrize(
    ("size", "words"),
    [
        (1e-6, "orders held 2, 1b, 1a, Special, Exclusive throughout"),
        (0.0005, "order ends at line; held 2, 1b, 1a, Special throughout"),
        (0.002, "order ends at line"),
        (0.5, "orders held 2, 1b, 1a, Special, Exclusive nowhere"),
    ],
)
def test_orders_at_any_size(size, words, assert_readable):
    figure = orders_figure(uncertainty(size), ORDERS)
    over = axes_named(figure, "angle and depth")
    legend = over.get_legend()
    assert (legend.get_title() if legend else over._left_title).get_text().startswith(words)
    assert_readable(figure)


def test_orders_need_a_table():
    with pytest.raises(InputError, match=r"uncertainty: thu_95 on \(angle, depth\) is missing"):
        orders_figure(uncertainty(0.1).drop_vars("thu_95"), ORDERS)
    with pytest.raises(InputError, match=r"tvu_95 on \(angle, depth\) is missing"):
        orders_figure(uncertainty(0.1).isel(angle=0), ORDERS)


# Interval


def growth(due, *, bins=5, scale=3600.0):
    at = scale * np.arange(1.0, bins + 1.0)
    error = np.array([0.1 * np.sqrt(at / scale), 0.2 * np.sqrt(at / scale)])
    return Growth(
        at, np.full(bins, 40), error, 0.8 * error, 1.3 * error, np.array(due) * scale, 0.7 * np.array(due) * scale,
        1.6 * np.array(due) * scale,
    )  # fmt: skip


def interval(by_time, by_distance, notes=()):
    return CastInterval(
        np.array([20.0, 60.0]), np.array([0.3, 0.3]), "a tolerance of 0.3 m", 65.0, 0.95, by_time, by_distance,
        Scales(7200.0, 1e4), 40, tuple(notes),
    )  # fmt: skip


def test_growth_and_when_due(assert_readable):
    # 0.2 m sqrt(t) reaches 0.3 m at 2.25; at 20 m depth 0.1 m sqrt(t) never does within five hours.
    found = interval(growth([np.inf, 2.25]), growth([np.inf, 2.25], scale=2000.0), ["casts alias the tide " * 12] * 6)
    figure = interval_figure(found, remark="invented data")
    assert "depth 60 m" in figure.texts[1].get_text()
    time = axes_named(figure, "time")
    curve = drawn(time, "error")
    assert np.interp(2.25, curve.get_xdata(), curve.get_ydata()) == pytest.approx(0.3, rel=2e-3)
    assert curve.get_ydata()[::20] == pytest.approx(0.2 * np.sqrt(curve.get_xdata()[::20]), rel=0.1)
    assert drawn(time, "due").get_xdata()[0] == 2.25
    assert drawn(time, "limit").get_ydata()[0] == 0.3
    assert time._left_title.get_text() == "due after 2.25 h (from 1.57 to 3.6 h)"
    assert axes_named(figure, "distance")._left_title.get_text() == "due after 4.5 km (from 3.15 to 7.2 km)"
    assert "and 2 more notes" in figure.texts[0].get_text()
    assert_readable(figure)


def test_no_interval_is_said(assert_readable):
    nothing = Growth(*(np.empty(0),) * 2, *(np.empty((2, 0)),) * 3, *(np.full(2, np.nan),) * 3)
    figure = interval_figure(interval(growth([np.inf, np.inf]), nothing), depth=20.0)
    assert "depth 20 m" in figure.texts[1].get_text()
    assert "limit not passed as far as the casts are apart" in axes_named(figure, "time")._left_title.get_text()
    assert [text.get_text() for text in axes_named(figure, "distance").texts] == ["too few pairs of casts"]
    assert_readable(figure)


# Passport


@pytest.fixture(scope="module")
def sounding():
    layers = [0.0, 20.0, 40.0, 90.0]
    casts = [
        Profile(layers, [1510.0 + more, 1510.0, 1490.0, 1490.5], id=f"OB-0{number}", latitude=56.0, longitude=-11.0,
                time=np.datetime64("2026-07-01T06:00") + np.timedelta64(number, "h"), noise=np.full(4, 0.05),
                shapes={"temperature": np.full(4, 0.1), "a_long_name_of_a_cause": [0.5, 0.3, 0.0, 0.0]})
        for number, more in ((1, 0.0), (2, 3.0))
    ]  # fmt: skip
    pings = {
        "time": np.array(["2026-07-01T07:15"], "datetime64[ns]"), "latitude": np.array([56.01]),
        "longitude": np.array([-11.0]), "transducer_depth": np.array([4.0]), "surface_sound_speed": np.array([1510.0]),
    }  # fmt: skip
    beams = {"two_way_travel_time": np.array([[0.2, np.nan]]), "across_track_angle": np.array([[-62.0, 10.0]])}
    corrector = Corrector(casts, transducer_depth_range=(4.0, 4.0), scales=Scales(7200.0, 1e4), deepest=100.0)
    block = PingBlock(pings, beams)
    command = "ocean-sound soundings line.nc " + " ".join(f"--casts OB-0{n}.csv" for n in range(9)) + " --passport 0,0"
    return passport(corrector, block, 0, 0, command=command), passport(corrector, block, 0, 1)


def test_the_passport_of_a_sounding(sounding, assert_readable):
    found, _ = sounding
    figure = passport_figure(found, remark="invented data")
    ray = drawn(axes_named(figure, "ray"), "ray")
    assert ray.get_ydata()[[0, -1]] == pytest.approx([4.0, found.depth])
    assert ray.get_xdata()[[0, -1]] == pytest.approx([0.0, found.across])
    assert found.across < 0.0
    assert "m to port" in figure.texts[-1].get_text()
    speed = drawn(axes_named(figure, "speed"), found.casts[0].id)
    assert found.casts[0].id == "OB-01"
    assert speed.get_xdata()[0] == 1510.0
    causes = axes_named(figure, "causes")
    names = [label.get_text() for label in causes.get_yticklabels()]
    assert names[-1] == "together"
    assert [name.replace(" ", "_") for name in names[:-1]] == list(found.causes)
    widths = [bar.get_width() for bar in causes.patches]
    assert np.sqrt(np.sum(np.square(widths[:-1]))) == pytest.approx(widths[-1])
    assert widths[-1] == pytest.approx(100.0 * found.tvu_95)
    assert f"OB-01 {found.casts[0].weight:.0%} (0.2 h, 1.1 km away)" in figure.texts[-1].get_text()
    assert figure.texts[0].get_text().startswith("To reproduce it:\nocean-sound soundings line.nc")
    assert_readable(figure)


def test_a_failed_sounding_has_no_ray(sounding):
    with pytest.raises(InputError, match=r"ping 0, beam 1: the travel time.* is missing; without a depth there is no"):
        passport_figure(sounding[1])


def test_many_causes_and_an_unknown_one(sounding, assert_readable):
    found, _ = sounding
    parts = [Contribution(f"cause_{n}", "", "", 1.0, 0.01 * (20 - n), 0.0) for n in range(14)]
    figure = passport_figure(replace(found, contributions=tuple(parts), command=""))
    names = [label.get_text() for label in axes_named(figure, "causes").get_yticklabels()]
    assert names == [*[f"cause {n}" for n in range(9)], "5 others", "together"]
    assert_readable(figure)
    unknown = replace(parts[0], depth=np.nan)
    figure = passport_figure(replace(found, contributions=(unknown, *parts[1:4]), tvu_95=np.nan))
    words = [text.get_text() for text in axes_named(figure, "causes").texts]
    assert words[0] == words[-1] == "unknown"
    assert "TVU unknown" in figure.texts[-1].get_text()
    assert_readable(figure)
