"""Loss against image sources, complex roots, normal modes, and invariants."""

from __future__ import annotations

import cmath

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.lib.stride_tricks import sliding_window_view
from scipy.optimize import brentq

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile
from ocean_sound.rays._kernels_influence import add_window
from ocean_sound.rays.gaussian_beams import STEEPEST, beam_field
from ocean_sound.rays.loss import loss
from ocean_sound.section import SEDIMENTS, Seabed, Section, Sediment, SpeedField, Surface

pytestmark = pytest.mark.kernels
long = pytest.mark.long  # for kernels that are not compiled

SPEED, DEPTH = 1500.0, 100.0
GUIDE = Profile([0.0, DEPTH], [SPEED, SPEED])
SAND = SEDIMENTS["sand"].below(SPEED)
# As fast as water but denser it sends back half of every plane wave, whatever its angle: images are exact.
HALF = Sediment(SPEED, 3000.0, 0.0)


def munk(seabed=5000.0):
    depth = np.linspace(0.0, seabed, 501)
    eta = 2.0 * (depth - 1300.0) / 1300.0
    return Profile(depth, 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta))))


def images(source, ranges, depths, frequency, *, reflections=0, bottom=DEPTH, kept=0.5, slope=0.0):
    """Pressure from the source and its images in a level surface and a plane seabed of a slope, to a number of them.

    Each chain of images begins with either boundary and takes them in turn.
    """
    x, z = np.meshgrid(ranges, depths, indexing="ij")
    k = 2.0 * np.pi * frequency / SPEED

    def from_place(place):
        distance = np.hypot(x - place[0], z - place[1])
        return np.exp(1j * k * distance) / distance

    total = from_place((0.0, source))
    nearest = np.hypot(x, z - source)
    for first in (0, 1):
        place, factor = np.array([0.0, source]), 1.0
        for number in range(reflections):
            if (first + number) % 2 == 0:
                place, factor = place * [1.0, -1.0], -factor
            else:
                normal = np.array([-slope, 1.0]) / np.hypot(1.0, slope)
                place = place - 2.0 * ((place - [0.0, bottom]) @ normal) * normal
                factor *= kept
            total += factor * from_place(place)
    return total, nearest


def compared(found, expected, nearest, away=0.3):
    """Differences, dB, where what is expected is not near a null."""
    clear = np.abs(expected) > away / nearest
    return (found.transmission_loss.to_numpy() + 20.0 * np.log10(np.abs(expected)))[clear]


def averaged(intensity, columns):
    """Loss of the intensity averaged over so many ranges, dB."""
    return -10.0 * np.log10(sliding_window_view(intensity, columns, axis=0).mean(axis=-1))


def intensity(found):
    return np.maximum(10.0 ** (-0.1 * found.transmission_loss.to_numpy()), 1e-30)


def verdict(one, other, within=np.inf):
    """Median and 90 % of |difference| and median of the signed one, where the loss is within so much of the least."""
    near = other < other.min() + within
    off = (one - other)[near]
    return float(np.median(np.abs(off))), float(np.percentile(np.abs(off), 90)), float(np.median(off))


@long
def test_lloyd_mirror():
    frequency, source = 100.0, 10.0
    ranges, depths = np.linspace(100.0, 5000.0, 50), np.linspace(1.0, 200.0, 100)
    found = loss(
        Profile([0.0, 1000.0], [SPEED, SPEED]), source_depth=source, frequency=frequency, ranges=ranges, depths=depths,
        method="beams", absorption=0.0,
    )  # fmt: skip
    off = compared(found, *images(source, ranges, depths, frequency, reflections=1, kept=0.0))
    assert off.size > 2500
    assert np.abs(off).max() < 0.3
    assert np.median(np.abs(off)) < 0.02


@long
def test_guide_by_images():
    frequency, source = 300.0, 36.0
    ranges, depths = np.linspace(200.0, 4000.0, 60), np.linspace(1.0, 99.0, 50)
    found = loss(
        GUIDE, source_depth=source, frequency=frequency, ranges=ranges, depths=depths, seabed=HALF, method="beams",
        absorption=0.0,
    )  # fmt: skip
    off = compared(found, *images(source, ranges, depths, frequency, reflections=40))
    assert np.median(np.abs(off)) < 0.02
    assert np.percentile(np.abs(off), 99) < 0.3


@long
@pytest.mark.parametrize("slope", [0.05, -0.03])
def test_sloping_seabed_by_its_mirror(slope):
    frequency, source, bottom = 500.0, 60.0, 200.0
    ranges, depths = np.linspace(200.0, 1500.0, 40), np.linspace(5.0, 150.0, 40)
    section = Section(
        SpeedField.from_speeds(np.linspace(0.0, 400.0, 5), np.full(5, SPEED)),
        Seabed([0.0, 2000.0], [bottom, bottom + 2000.0 * slope], kind=HALF), max_range=2000.0,
    )  # fmt: skip
    found = loss(section, source_depth=source, frequency=frequency, ranges=ranges, depths=depths, absorption=0.0)
    assert found.attrs["method"] == "beams"
    off = compared(found, *images(source, ranges, depths, frequency, reflections=14, bottom=bottom, slope=slope))
    assert np.median(np.abs(off)) < 0.15
    assert np.percentile(np.abs(off), 90) < 0.6


def pekeris(source, ranges, depths, frequency):
    """The field of the modes of an isovelocity guide over sand, from complex roots (Pekeris 1948)."""
    water = 2 * np.pi * frequency / SPEED
    sand = 2 * np.pi * frequency / SAND.speed
    below, ratio = sand * (1 + 1j * SAND.attenuation * np.log(10) / (40 * np.pi)), SAND.density / 1000.0

    def condition(k, below):
        g = cmath.sqrt(water**2 - k**2)
        return ratio * g * cmath.cos(g * DEPTH) + cmath.sqrt(k**2 - below**2) * cmath.sin(g * DEPTH)

    places = np.sqrt(water**2 - np.linspace(1e-6, np.sqrt(water**2 - sand**2) - 1e-9, 20_001) ** 2)
    values = [condition(k, sand).real for k in places]
    total = np.zeros((len(ranges), len(depths)), dtype=complex)
    for a, b, x, y in zip(places, places[1:], values, values[1:], strict=False):
        if x * y > 0:
            continue
        k = complex(brentq(lambda q: condition(q, sand).real, a, b, xtol=1e-15)) + 1e-6j
        for _ in range(60):
            k -= condition(k, below) * 2e-7 / (condition(k + 1e-7, below) - condition(k - 1e-7, below))
        g, tail = cmath.sqrt(water**2 - k**2), cmath.sqrt(k**2 - below**2)
        norm = DEPTH / 2 - cmath.sin(2 * g * DEPTH) / (4 * g) + cmath.sin(g * DEPTH) ** 2 / (2 * ratio * tail)
        along = np.exp(1j * k * ranges) * np.sqrt(2 * np.pi / (k * ranges)) * np.exp(0.25j * np.pi)
        total += np.outer(along, np.sin(g * source) * np.sin(g * np.asarray(depths)) / norm)
    return total


@long
@pytest.mark.parametrize("frequency", [50.0, 200.0, 1000.0])
def test_pekeris_guide_by_complex_roots_and_by_modes(frequency):
    source, ranges, depths = 36.0, np.linspace(100.0, 20_000.0, 200), np.linspace(2.0, 98.0, 25)
    options = {"source_depth": source, "frequency": frequency, "ranges": ranges, "depths": depths, "absorption": 0.0}
    beams = loss(GUIDE, seabed="sand", method="beams", **options)
    roots = np.abs(pekeris(source, ranges, depths, frequency)) ** 2
    far = ranges[:-4] >= 1000.0
    median, ninety, bias = verdict(averaged(intensity(beams), 5)[far], averaged(roots, 5)[far])
    assert median < 0.02
    assert ninety < 0.1
    assert abs(bias) < 0.02
    # modes take attenuation to first order
    modes = loss(GUIDE, seabed="sand", method="modes", insist=True, **options)
    median, ninety, bias = verdict(averaged(intensity(beams), 5)[far], averaged(intensity(modes), 5)[far])
    assert median < 0.12
    assert ninety < 0.35
    assert abs(bias) < 0.1


@long
@pytest.mark.parametrize(
    ("frequency", "seabed", "limits"),
    [(50.0, "sand", (0.6, 2.1, 0.2)), (50.0, None, (0.5, 3.5, 0.15)), (200.0, None, (0.2, 2.0, 0.1))],
)
def test_munk_channel_by_modes(frequency, seabed, limits):
    """Where the seabed absorbs all, modes lack the sound that they do not trap, so only where the loss is small."""
    ranges, depths = np.linspace(400.0, 100_000.0, 250), np.linspace(50.0, 4950.0, 50)
    options = {"source_depth": 1000.0, "frequency": frequency, "ranges": ranges, "depths": depths, "absorption": 0.0}
    beams, modes = (
        averaged(intensity(loss(munk(), seabed=seabed, method=method, insist=True, **options)), 3)
        for method in ("beams", "modes")
    )
    far = ranges[:-2] >= 20_000.0
    found = verdict(beams[far], modes[far], np.inf if seabed else 25.0)
    assert np.all(np.abs(found) < limits), found


@long
def test_flattened_water_by_modes():
    section = Section.from_profile(munk(), seabed=Seabed.flat(5000.0, kind="sand"), max_range=60_000.0)
    assert section.radius is not None
    ranges, depths = np.linspace(25_000.0, 60_000.0, 90), np.linspace(50.0, 4950.0, 40)
    options = {"source_depth": 1000.0, "frequency": 50.0, "ranges": ranges, "depths": depths, "absorption": 0.0}
    found = [averaged(intensity(loss(section, method=method, **options)), 3) for method in ("beams", "auto")]
    median, _, bias = verdict(*found)
    assert median < 0.65
    assert abs(bias) < 0.2


def summer():
    depth = np.linspace(0.0, DEPTH, 101)
    return Profile(depth, 1510.0 - 8.0 * np.tanh((depth - 25.0) / 8.0))


@long
@pytest.mark.parametrize(
    ("water", "frequency", "start", "end", "limit"),
    [(munk(), 50.0, 30_000.0, 34_000.0, 0.2), (GUIDE, 200.0, 4000.0, 6000.0, 0.01)],
)
def test_source_and_receiver_exchanged(water, frequency, start, end, limit):
    """Of the loss averaged over half of the ranges, by the pairs of eight depths."""
    bottom = water.depth[-1]
    section = Section.from_profile(water, seabed=Seabed.flat(bottom), max_range=end, flatten=False)
    depths, ranges = np.linspace(0.05, 0.95, 8) * bottom, np.linspace(start, end, 40)
    there = np.array([
        averaged(beam_field(section, source_depth=z, frequency=frequency, ranges=ranges, depths=depths).intensity, 20)
        for z in depths
    ])  # (sources, ranges, receivers)  # fmt: skip
    off = np.abs(there - there.transpose(2, 1, 0)).transpose(0, 2, 1)[np.triu_indices(8, 1)]
    assert np.median(off) < limit


@long
def test_twice_the_beams():
    options = {
        "source_depth": 36.0, "frequency": 400.0, "ranges": np.linspace(50.0, 8000.0, 160),
        "depths": np.linspace(2.0, 98.0, 25), "seabed": "sand", "method": "beams",
    }  # fmt: skip
    once = loss(summer(), **options)
    twice = loss(summer(), beams=2 * once.attrs["beams"], **options)
    off = averaged(intensity(once), 10) - averaged(intensity(twice), 10)
    assert np.median(np.abs(off)) < 0.1


@long
def test_dropped_phases_by_modes():
    options = {
        "source_depth": 36.0, "frequency": 1000.0, "ranges": np.linspace(2000.0, 10_000.0, 40),
        "depths": np.linspace(20.0, 80.0, 20), "seabed": "sand", "phases": "dropped", "absorption": 0.0,
    }  # fmt: skip
    beams, modes = (loss(GUIDE, method=method, **options) for method in ("beams", "auto"))
    assert modes.attrs["method"] == "modes"
    off = (beams.transmission_loss - modes.transmission_loss).to_numpy()
    assert np.median(np.abs(off)) < 0.15
    assert abs(np.median(off)) < 0.1


@long
def test_phases_of_the_surface_alone_keep_the_lloyd_mirror():
    """Far from the surface the two paths arrive alike, so what is kept is the whole pattern of a shallow source."""
    frequency, source = 300.0, 5.0
    ranges, depths = np.linspace(500.0, 4000.0, 30), np.linspace(300.0, 900.0, 30)
    found = loss(
        Profile([0.0, 1000.0], [SPEED, SPEED]), source_depth=source, frequency=frequency, ranges=ranges, depths=depths,
        phases="surface", absorption=0.0,
    )  # fmt: skip
    off = compared(found, *images(source, ranges, depths, frequency, reflections=1, kept=0.0), away=0.5)
    assert np.median(np.abs(off)) < 0.1
    assert np.percentile(np.abs(off), 95) < 0.5


@long
def test_absorption_costs_its_decibels_along_the_path():
    options = {
        "source_depth": 30.0,
        "frequency": 500.0,
        "ranges": [2000.0, 4000.0],
        "depths": [40.0],
        "method": "beams",
    }
    clear, dim = (loss(Profile([0.0, 1000.0], [SPEED] * 2), absorption=a, **options) for a in (0.0, 3.0))
    assert (dim - clear).transmission_loss.to_numpy().ravel() == pytest.approx([6.0, 12.0], abs=0.02)


@long
def test_wind_takes_from_what_the_surface_sends_back():
    """Lloyd's mirror with a surface of -exp(-2 (k s sin)²), s of Pierson and Moskowitz (1964)."""
    frequency, source, wind = 1000.0, 10.0, 8.0
    ranges, depths = np.linspace(200.0, 1500.0, 40), np.linspace(20.0, 200.0, 60)
    found = loss(
        Profile([0.0, 1000.0], [SPEED, SPEED]), source_depth=source, frequency=frequency, ranges=ranges, depths=depths,
        wind_speed=wind, absorption=0.0, method="beams",
    )  # fmt: skip
    x, z = np.meshgrid(ranges, depths, indexing="ij")
    k, rough = 2 * np.pi * frequency / SPEED, np.sqrt(0.0081 / (4 * 0.74)) * wind**2 / 9.81
    near, far = np.hypot(x, z - source), np.hypot(x, z + source)
    back = np.exp(-2 * (k * rough * (z + source) / far) ** 2)
    expected = np.exp(1j * k * near) / near - back * np.exp(1j * k * far) / far
    off = compared(found, expected, near)
    assert np.median(np.abs(off)) < 0.02
    assert np.percentile(np.abs(off), 99) < 0.3


@long
def test_a_surface_and_seabed_that_send_nothing_back_leave_spherical_spreading():
    section = Section.from_profile(
        GUIDE, seabed=Seabed.flat(DEPTH, kind=None), surface=Surface(reflects=False), max_range=2000.0
    )
    ranges, depths = np.linspace(200.0, 1500.0, 14), np.linspace(20.0, 80.0, 13)
    found = loss(section, source_depth=50.0, frequency=800.0, ranges=ranges, depths=depths, absorption=0.0)
    assert found.attrs["method_reason"] == "the surface sends nothing back"
    distance = np.hypot(ranges[:, None], depths - 50.0)
    off = found.transmission_loss.to_numpy() - 20.0 * np.log10(distance)
    assert np.abs(off).max() < 0.3


@long
def test_outside_the_water_there_is_no_loss_to_give():
    section = Section.from_profile(Profile([0, 300], [1500, 1500]), seabed=Seabed([0.0, 4000.0], [100.0, 300.0]))
    found = loss(section, source_depth=50.0, frequency=300.0, ranges=[500.0, 3500.0], depths=[-5.0, 0.0, 60.0, 200.0])
    values = found.transmission_loss.to_numpy()
    assert np.isnan(values[:, 0]).all()
    assert np.isnan(values[0, 3])
    assert np.isfinite(values[1, 3])
    assert np.isinf(values[:, 1]).all() or np.all(values[:, 1] > values[:, 2] + 30.0)
    assert found.seabed_depth.to_numpy() == pytest.approx(section.seabed.depth_at([500.0, 3500.0]))
    assert found.attrs["method_reason"] == "water or seabed change with range"
    assert found.transmission_loss.attrs["units"] == "1"
    assert found.transmission_loss.attrs["reference"] == "1 m from the source"


@long
def test_listed_receivers_have_the_loss_of_the_grid():
    options = {"source_depth": 36.0, "frequency": 300.0, "seabed": "sand"}
    grid = loss(GUIDE, ranges=[300.0, 1000.0, 2000.0], depths=[10.0, 50.0], **options)
    listed = loss(GUIDE, ranges=[2000.0, 300.0, 1000.0], depths=[50.0, 10.0, 10.0], listed=True, **options)
    assert listed.transmission_loss.dims == ("receiver",)
    values = grid.transmission_loss.to_numpy()
    assert listed.transmission_loss.to_numpy() == pytest.approx([values[2, 1], values[0, 0], values[1, 0]], abs=1e-9)
    assert grid.loss_method.to_numpy().tolist() == [0, 1, 1]


@long
def test_threads_and_progress_change_nothing():
    options = {"source_depth": 36.0, "frequency": 300.0, "seabed": "sand", "method": "beams"}
    options |= {"ranges": np.linspace(100.0, 3000.0, 10), "depths": np.linspace(1.0, 99.0, 20)}
    done = []
    one = loss(GUIDE, progress=done.append, **options)
    two = loss(GUIDE, threads=2, **options)
    assert one.transmission_loss.to_numpy() == pytest.approx(two.transmission_loss.to_numpy(), abs=1e-9)
    assert done[-1] == 1.0
    assert one.attrs["beams"] > 0
    assert one.attrs["beam_steps"] > 0
    assert one.attrs["beam_half_width"] > 0


def changing(depth):
    return Section.from_profile(Profile([0, 300], [1500, 1500]), seabed=Seabed([0.0, 4000.0], [depth, 300.0]))


@long
@pytest.mark.parametrize(
    ("water", "change", "method", "reason"),
    [
        (GUIDE, {}, "modes", "nothing changes with range and the water is 13.3 wavelengths deep"),
        (GUIDE, {"frequency": 5.0}, "beams", "modes would serve, but no mode is trapped at 5 Hz"),
        (GUIDE, {"frequency": 1e4}, "beams", "667 wavelengths deep, more than 200"),
        (GUIDE, {"phases": "surface"}, "beams", "phases of the surface alone"),
        (GUIDE, {"seabed": "limestone"}, "beams", "carries shear waves"),
        (changing(100.0), {"seabed": ...}, "beams", "water or seabed change with range"),
        (changing(10.0), {"seabed": ..., "insist": True}, "beams", "water or seabed change with range"),
    ],
)
def test_the_method_is_chosen_by_validity_and_says_why(water, change, method, reason):
    options = {"source_depth": 5.0, "frequency": 200.0, "ranges": [700.0], "depths": [8.0], "seabed": "sand", **change}
    found = loss(water, **{name: value for name, value in options.items() if value is not ...}, absorption=0.0)
    assert found.attrs["method"] == method
    assert reason in found.attrs["method_reason"]
    assert np.isfinite(found.transmission_loss.to_numpy()).all()


def test_low_frequency_over_a_changing_seabed_is_refused_by_name():
    with pytest.raises(InputError, match=r"1\.33 wavelengths deep at its shallowest .* insist=True"):
        loss(changing(10.0), source_depth=5.0, frequency=200.0, ranges=[0.001, 700.0], depths=[8.0])


@long
def test_modes_asked_for_leave_out_what_they_do_not_hold_for():
    found = loss(
        GUIDE, source_depth=5.0, frequency=200.0, ranges=[300.0, 700.0], depths=[8.0], seabed="sand", method="modes"
    )
    assert np.isnan(found.transmission_loss.to_numpy()[:, 0]).tolist() == [True, False]
    assert "nearer than 5 depths of water modes do not hold" in found.attrs["notes"]


@long
@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"frequency": -1.0}, "frequency is -1 Hz"),
        ({"source_depth": 200.0}, "source depth 200 m is below the seabed"),
        ({"ranges": [0.0, 10.0]}, "a range is 0 m: above 0"),
        ({"ranges": [20.0, 10.0]}, "ranges do not increase"),
        ({"depths": [np.nan]}, "depths are no list of finite numbers"),
        ({"listed": True}, "2 ranges and 1 depths of receivers"),
        ({"method": "magic"}, "method is 'magic': auto, beams, modes"),
        ({"phases": "some"}, "phases is 'some': kept, surface, dropped"),
        ({"beams": 1}, "beams is 1: from 2"),
        ({"half_width": 0.0}, "half_width is 0 m"),
        ({"absorption": -1.0}, "absorption is -1 dB/km"),
        ({"seabed_depth": 200.0}, "seabed depth 200 m is outside the profile"),
        ({"seabed_depth": 50.0, "seabed": Seabed.flat(100.0)}, "the seabed given has its own"),
        ({"method": "modes", "seabed": "basalt"}, "modes do not serve: the seabed carries shear waves"),
        ({"method": "modes", "frequency": 5.0}, "no mode is trapped at 5 Hz.*beams would be right"),
    ],
)
def test_bad_input(change, words):
    options = {"source_depth": 5.0, "frequency": 200.0, "ranges": [300.0, 700.0], "depths": [8.0], "seabed": "sand"}
    with pytest.raises(InputError, match=words):
        loss(GUIDE, **{**options, **change})


@long
def test_a_section_has_its_own_seabed_and_range():
    section = Section.from_profile(GUIDE, seabed=DEPTH, surface=Surface(3.0), max_range=1000.0)
    options = {"source_depth": 5.0, "frequency": 200.0, "depths": [8.0]}
    with pytest.raises(InputError, match="seabed is 'sand', but a section has its own"):
        loss(section, ranges=[300.0], seabed="sand", **options)
    with pytest.raises(InputError, match="range 2000 m is beyond the section"):
        loss(section, ranges=[2000.0], **options)
    assert loss(section, ranges=[300.0], **options).attrs["wind_speed"] == 3.0


def slope_of_many_kinds(flatten):
    """Water that bends rays, over a seabed that falls and changes from sand to a sediment of its own to nothing."""
    return Section.from_profile(
        Profile([0.0, 50.0, 150.0], [1510.0, 1500.0, 1495.0]), max_range=2000.0, flatten=flatten, tolerance=0.5,
        seabed=Seabed([0.0, 300.0, 2000.0], [100.0, 105.0, 130.0], kind=[(0.0, "sand"), (200.0, SAND), (300.0, None)]),
    )  # fmt: skip


SMALL = {"source_depth": 40.0, "frequency": 200.0, "ranges": np.array([50.0, 150.0, 250.0, 400.0]), "beams": 64}


@pytest.mark.parametrize("phases", ["kept", "dropped"])
def test_depths_between_others_change_nothing(phases):
    """An even grid goes by recurrence, an uneven one point by point."""
    even = np.linspace(0.0, 120.0, 61)
    uneven = np.sort(np.append(even, [13.3, 77.7]))
    section = slope_of_many_kinds(False)
    one, two = (beam_field(section, depths=z, phases=phases, **SMALL) for z in (even, uneven))
    shared = two.intensity[:, np.isin(uneven, even)]
    assert shared == pytest.approx(one.intensity, rel=1e-9, abs=1e-18)
    assert one.steps == two.steps
    wet = even[None, 1:] < section.seabed.depth_at(SMALL["ranges"])[:, None] - 1.0
    assert np.all(one.intensity[:, 1:][wet] > 0.0)
    assert np.all(one.intensity[:, even > 125.0] == 0.0)


def test_a_given_number_of_beams_without_phases_is_spread_evenly():
    depths = np.linspace(5.0, 95.0, 10)
    section = slope_of_many_kinds(False)
    dropped, kept = (beam_field(section, depths=depths, phases=phases, **SMALL) for phases in ("dropped", "kept"))
    assert dropped.spacing == pytest.approx(2.0 * STEEPEST / 64)
    assert kept.spacing > dropped.spacing  # closer where rays part faster, wider elsewhere


def test_over_a_short_range_the_earth_is_flat():
    depths = np.linspace(5.0, 95.0, 10)
    flat, round_ = (beam_field(slope_of_many_kinds(f), depths=depths, **SMALL) for f in (False, True))
    assert np.median(np.abs(10.0 * np.log10(round_.intensity / flat.intensity))) < 0.02


def test_beams_that_a_steep_seabed_turns_back_are_counted():
    section = Section.from_profile(
        GUIDE, seabed=Seabed([0.0, 200.0, 260.0, 1000.0], [95.0, 95.0, 8.0, 8.0], kind=HALF), max_range=1000.0
    )
    found = loss(
        section, source_depth=50.0, frequency=2000.0, ranges=[100.0, 900.0], depths=[4.0, 50.0], beams=64,
        absorption=0.0, insist=True,
    )  # fmt: skip
    assert "beams were turned back by the seabed; what they carry is left out" in found.attrs["notes"]


@settings(max_examples=50)
@given(
    centre=st.floats(-50.0, 150.0), width=st.floats(0.3, 60.0), rate=st.floats(-3.0, 3.0), phase=st.floats(-9.0, 9.0),
    number=st.integers(1, 150), energy=st.booleans(),
)  # fmt: skip
def test_a_window_is_the_exponential_that_it_stands_for(centre, width, rate, phase, number, energy):
    depths = np.linspace(0.0, 100.0, number)
    real, imag = np.zeros(number), np.zeros(number)
    add_window(real, imag, depths, True, 0.0, 90.0, centre, width, rate, phase, 0.7, energy)
    away = (depths - centre) / width
    shape = 0.7 * np.exp(-(away**2)) * ((np.abs(away) <= 2.5) & (depths <= 90.0))
    value = shape**2 if energy else shape * np.exp(1j * (phase + rate * (depths - centre)))
    edge = np.abs(np.abs(away) - 2.5) < 1e-6
    assert (real + 1j * imag)[~edge] == pytest.approx(value[~edge], abs=1e-10)
