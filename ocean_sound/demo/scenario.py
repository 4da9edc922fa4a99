"""The demonstration, end to end: what it reads comes with the package, what it writes goes into one folder.

The survey from Ostray Firth to Ostray Deep is invented, places and data alike; the cast of part 7 is real.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from ..archive import build_archive, open_archive
from ..casts import CastBlock, check_block, read_casts
from ..errors import OutputError
from ..figures import (
    archive_figure,
    cast_sheet_figure,
    comparison_figure,
    fan_figure,
    loss_figure,
    passport_figure,
    profile_figure,
    save_figure,
    section_figure,
    shadow_figure,
    swath_figure,
)
from ..files import packaged_profile, packaged_profiles, write_csv, write_dataset, write_text
from ..profile import Profile
from ..rays import even_angles, find_shadow, trace_fan
from ..rays.loss import loss
from ..section import Seabed, Section
from ..soundings import Scales, compare, leave_one_out, thin
from ..soundings.in_memory import correct_soundings
from ..soundings.passport import passport_of_file
from ..soundings.streaming import Job
from ..water import equations, range_report, speed_of_columns
from .sensors import receivers
from .survey import synthetic_survey
from .words import CAUTIONS, NEXT, TITLE

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from pathlib import Path

    from ..casts import Cast, CheckReport

# A folder with this file in it is the demonstration's own, and may be written over.
MARKER = "SUMMARY.txt"

EDGE, LATER = "invented/ostray_edge.csv", "invented/ostray_edge_later.csv"
DEEP, REAL = "invented/ostray_deep.csv", "observed/gsw_check_cast_1.csv"
INVENTED = "invented data"
CREDIT = "real cast from the gsw package (SCOR/IAPSO WG127, BSD-3-Clause)"
# The echo sounder of the invented survey: its depth, and angles from the vertical across its swath.
SOUNDER_DEPTH, SWATH = 4.0, (0.0, 30.0, 45.0, 60.0, 65.0)
# How far a beam may move when a profile is thinned, m.
TOLERANCE = 0.005
# How long, s, and how far, m, a cast may stand for the water of the front; where the casts of the survey go.
FRONT_SCALES, CASTS = Scales(time=1.5 * 3600.0, length=30_000.0), "survey-casts"
LEFT_OUT_DEPTH = 110.0
_UNITS = {"depth": "m", "temperature": "degC", "salinity": "PSS-78"}
SOURCE_DEPTH, DEEP_RANGE = 100.0, 80_000.0
# The invented slope from Ostray Deep up to Ostray Edge: range along the track and depth, m; what it is made of; how
# far it is looked at, and the depth at which someone listens.
SLOPE = (
    (0.0, 2550.0), (30_000.0, 2500.0), (60_000.0, 2300.0), (85_000.0, 1500.0), (105_000.0, 700.0), (125_000.0, 260.0),
    (147_000.0, 203.0),
)  # fmt: skip
SLOPE_KINDS = ((0.0, "clay"), (70_000.0, "silt"), (110_000.0, "sand"))
SLOPE_RANGE, LISTENING_DEPTH = 110_000.0, 60.0
FREQUENCY = 400.0  # Hz


def run_demo(folder: Path, *, replace: bool = False, progress: Callable[[str], None] = lambda _: None) -> str:
    """Run the demonstration.

    Parameters
    ----------
    folder : pathlib.Path
        Where the results go; made if it does not exist.
    replace : bool
        Whether files of a folder that an earlier demonstration did not make may be replaced.
    progress : callable
        Told what is being done, in one line each.

    Returns
    -------
    str
        The summary, which is also written into the folder.

    Raises
    ------
    OutputError
        If the folder can't be made, or holds something else and `replace` is not set.

    """
    if folder.exists() and not folder.is_dir():
        raise OutputError(f"{folder}: is a file; name a folder for the demonstration")
    if folder.is_dir() and any(folder.iterdir()) and not (folder / MARKER).is_file() and not replace:
        raise OutputError(f"{folder}: holds other things; name a new folder, or --replace to write among them")
    folder.mkdir(parents=True, exist_ok=True)
    parts = []
    for told, part in (
        (
            "1 of 8: a shelf-edge cast, checked, and its beams (the first run compiles kernels: some seconds)",
            _shelf_edge,
        ),
        ("2 of 8: the same place later, and what that does to soundings", _hours_later),
        ("3 of 8: a survey across a front, corrected with the casts taken on the way", _survey),
        ("4 of 8: a moored source in deep water, its rays and shadow zones", _deep_water),
        ("5 of 8: from the deep up the slope, through two casts", _slope),
        ("6 of 8: receivers for tags on fish, where they hear and where not", receivers),
        ("7 of 8: a real open cast under every equation", _real_cast),
        ("8 of 8: an archive of all casts that come with the package", _all_casts),
    ):
        progress(told)
        parts.append("\n".join(part(folder)))
    summary = "\n\n".join([TITLE, *parts, NEXT, CAUTIONS]) + "\n"
    write_text(folder / MARKER, summary, replace=True)
    return summary


def _cast(name: str) -> Cast:
    return next(iter(read_casts(packaged_profile(name))))


def _shelf_edge(folder: Path) -> Iterator[str]:
    """Profile, features, and what refraction does to the outer beams of an echo sounder."""
    cast = _cast(EDGE)
    block, report = check_block(CastBlock.from_casts([cast]), thresholds="coast")
    profile = Profile.from_cast(block[0], accuracy="ctd")
    features = profile.features()
    thinned = thin(profile, tolerance=TOLERANCE, transducer_depth=SOUNDER_DEPTH)
    write_dataset(profile.to_dataset(), folder / "shelf-edge-profile.nc", replace=True)
    write_csv(folder / "shelf-edge-profile.csv", profile.columns(), preamble=profile.about(), replace=True)
    picture = cast_sheet_figure(block[0], profile, features, report, remark=INVENTED)
    save_figure(picture, folder / "shelf-edge-cast.png", replace=True)
    yield "1. Shelf edge, for a survey hydrographer (invented cast)"
    yield f"   {cast.id}: {len(cast)} levels to {profile.depth[-1]:.0f} m, sound speed by TEOS-10"
    yield f"   mixed layer to {features.sonic_layer_depth:.0f} m; steepest gradient {features.steepest_gradient:.2f} /s"
    yield f"   checked by {len(report.levels)} tests of levels: {_verdict(report)}"
    shift = thinned.guarantee
    yield f"   {len(thinned.profile)} of its levels would do: no beam within {shift.max_angle:.0f} degrees then"
    yield f"   moves by more than {1000 * shift.distance:.1f} mm anywhere in the water"
    yield f"   mean speed {features.mean_speed:.2f} m/s, harmonic mean {features.harmonic_mean_speed:.2f} m/s"
    yield "   Beams to the seabed, traced through the profile, and how far off a straight line is that takes the speed"
    yield "   at the sounder all the way (same angle, same time):"
    yield "     from the vertical   depth m   across m   depth off m   across off m"
    beams = trace_fan(
        profile,
        source_depth=SOUNDER_DEPTH,
        launch_angles=[90.0 - angle for angle in SWATH],
        max_range=50.0 * profile.depth[-1],
        max_seabed_bounces=0,
    )
    write_dataset(beams.to_dataset(), folder / "shelf-edge-beams.nc", replace=True)
    slant = profile.at(SOUNDER_DEPTH) * beams.travel_time
    angles = np.radians(SWATH)
    columns = (
        SWATH,
        beams.depth,
        beams.range,
        SOUNDER_DEPTH + slant * np.cos(angles) - beams.depth,
        slant * np.sin(angles) - beams.range,
    )
    for angle, depth, across, wrong_depth, wrong_across in zip(*columns, strict=True):
        yield f"     {angle:15.0f} °   {depth:7.2f}   {across:8.2f}   {wrong_depth:+11.2f}   {wrong_across:+12.2f}"


def _verdict(report: CheckReport) -> str:
    """How many values failed or are suspect, over all tests of levels."""
    counts = [count for by_name in report.counts().values() for count in by_name.values()]
    failed, suspect = (sum(count.get(word, 0) for count in counts) for word in ("fail", "suspect"))
    return f"{failed} values failed, {suspect} suspect"


def _hours_later(folder: Path) -> Iterator[str]:
    """What a change of the water does to soundings corrected with the earlier cast."""
    found = compare(_cast(EDGE), _cast(LATER), angles=[0.0, 45.0, 65.0], transducer_depth=SOUNDER_DEPTH)
    write_dataset(found, folder / "shelf-edge-later.nc", replace=True)
    save_figure(comparison_figure(found, remark=INVENTED), folder / "shelf-edge-later.png", replace=True)
    deepest = found.isel(sounding_depth=-1)
    yield "2. The same place eight hours later (invented cast)"
    most = float(abs(found.speed_difference).max())
    yield f"   speed differs by up to {most:.1f} m/s where the thermocline has moved"
    yield f"   soundings at {float(deepest.sounding_depth):.0f} m corrected with the earlier cast are wrong by:"
    yield "     from the vertical   depth m   across m"
    for angle in found.angle.values:
        beam = deepest.sel(angle=angle)
        yield f"     {angle:15.0f} °   {float(beam.depth_error):+7.2f}   {float(beam.across_track_error):+8.2f}"


def _deep_water(folder: Path) -> Iterator[str]:
    """Rays and shadow zones of a moored source."""
    profile = Profile.from_cast(_cast(DEEP))
    features = profile.features()
    fan = trace_fan(
        profile,
        source_depth=SOURCE_DEPTH,
        launch_angles=even_angles(-15.0, 15.0, 61),
        max_range=DEEP_RANGE,
        points=1001,
        max_seabed_bounces=1,
    )
    shadow = find_shadow(profile, source_depth=SOURCE_DEPTH, max_range=DEEP_RANGE)
    write_dataset(fan.to_dataset(shadow), folder / "deep-water-rays.nc", replace=True)
    write_csv(folder / "deep-water-rays.csv", fan.columns(), preamble=fan.about(), replace=True)
    save_figure(profile_figure(profile, features, remark=INVENTED), folder / "deep-water-profile.png", replace=True)
    save_figure(fan_figure(fan, shadow=shadow, remark=INVENTED), folder / "deep-water-rays.png", replace=True)
    share = shadow.summary()
    yield "4. Deep water, for someone placing a source or receiver (invented cast)"
    yield f"   axis of the deep channel at {features.axis_depth:.0f} m, critical depth {features.critical_depth:.0f} m"
    yield f"   source at {SOURCE_DEPTH:.0f} m, {len(fan)} rays to {DEEP_RANGE / 1000:.0f} km: " + "; ".join(
        f"{count} {name.replace('_', ' ')}" for name, count in fan.status_counts().items()
    )
    yield f"   {share['no_bounce']:.0%} of the water to that range hears no ray without a bounce,"
    yield f"   {share['surface_bounces']:.0%} none even with surface bounces (shadow is not silence)"


def _slope(folder: Path) -> Iterator[str]:
    """Rays, shadow and convergence zones where water and seabed change along the track."""
    ranges, depths = np.array(SLOPE).T
    section = Section.from_casts(
        [_cast(DEEP), _cast(EDGE)], seabed=Seabed(ranges, depths, kind=SLOPE_KINDS), smooth=20.0
    )
    fan = trace_fan(
        section, source_depth=SOURCE_DEPTH, launch_angles=even_angles(-10.0, 10.0, 21), max_range=SLOPE_RANGE,
        points=801,
    )  # fmt: skip
    depth = LISTENING_DEPTH
    listening = np.union1d(np.linspace(0.0, section.seabed.deepest, 61), [depth])
    shadow = find_shadow(
        section, source_depth=SOURCE_DEPTH, max_range=SLOPE_RANGE, depths=listening, grid=(61, 111)
    )  # fmt: skip
    write_dataset(fan.to_dataset(shadow), folder / "slope-rays.nc", replace=True)
    save_figure(section_figure(section, fan, remark=INVENTED), folder / "slope-rays.png", replace=True)
    save_figure(shadow_figure(shadow, [depth], remark=INVENTED), folder / "slope-shadow.png", replace=True)
    heard = loss(
        Profile.from_cast(_cast(EDGE)), source_depth=SOUNDER_DEPTH, frequency=FREQUENCY, seabed="sand",
        phases="dropped", ranges=np.linspace(40.0, 8000.0, 200), depths=np.linspace(0.0, 202.0, 102),
    )  # fmt: skip
    write_dataset(heard, folder / "shelf-edge-loss.nc", replace=True)
    save_figure(loss_figure(heard, remark=INVENTED), folder / "shelf-edge-loss.png", replace=True)
    share = shadow.summary()
    yield "5. From the deep up the slope, through two casts (invented casts and seabed)"
    yield f"   {section.max_range / 1000:.0f} km of water that changes from cast to cast, above clay, silt and sand"
    yield f"   source at {SOURCE_DEPTH:.0f} m, {len(fan)} rays to {SLOPE_RANGE / 1000:.0f} km: " + "; ".join(
        f"{count} {name.replace('_', ' ')}" for name, count in fan.status_counts().items()
    )
    zones = shadow.convergence_zones(depth)
    listed = ", ".join(f"{start / 1000:.0f} to {end / 1000:.0f} km" for _, start, end in zones)
    yield f"   {share['surface_bounces']:.0%} of the water hears none that has not met the seabed; at {depth:.0f} m"
    yield f"   such rays come back in convergence zones: {listed or 'none'}"
    median = float(heard.transmission_loss.sel(range=5000.0, method="nearest").median())
    yield f"   on the shelf, {FREQUENCY:.0f} Hz over sand: {median:.0f} dB of loss at 5 km (median over depth),"
    yield f"   by {heard.attrs['method']}, since {heard.attrs['method_reason']}"


def _real_cast(folder: Path) -> Iterator[str]:
    """A real cast: its profile, and what each equation makes of it."""
    cast = _cast(REAL)
    profile = Profile.from_cast(cast)
    picture = profile_figure(profile, profile.features(), remark=CREDIT)
    save_figure(picture, folder / "real-cast-profile.png", replace=True)
    yield "7. A real open cast, for whoever must defend a speed"
    yield f"   {CREDIT}"
    yield f"   {cast.id}, at {cast.latitude:g}, {cast.longitude:g}: {len(cast)} levels to {profile.depth[-1]:.0f} m"
    yield "   Each equation less TEOS-10, over the levels within the range of the equation:"
    yield "     equation             levels   mean m/s   largest m/s"
    measured = {name: cast.values[name] for name in ("temperature", "salinity", "pressure")}
    reference = speed_of_columns(**measured, latitude=cast.latitude, longitude=cast.longitude, equation="teos10")
    columns = {"pressure": measured["pressure"], "teos10 [m/s]": reference}
    for name in equations():
        inside = ~range_report(name, **measured, latitude=cast.latitude).outside
        if name == "teos10" or not inside.any():
            continue  # the equations for fresh water have nothing to say here
        speed = speed_of_columns(**measured, latitude=cast.latitude, longitude=cast.longitude, equation=name)
        columns[f"{name} [m/s]"] = np.where(inside, speed, np.nan)
        off = (speed - reference)[inside]
        largest = off[np.argmax(np.abs(off))]
        yield f"     {name:<20} {inside.sum():6d}   {off.mean():+8.3f}   {largest:+11.3f}"
    write_csv(folder / "real-cast-equations.csv", columns, replace=True)


def _all_casts(folder: Path) -> Iterator[str]:
    """One CF netCDF archive of every cast that comes with the package."""
    output = folder / "archive.nc"
    paths = [packaged_profile(name) for name in packaged_profiles()]
    built = build_archive(
        paths, output, workers=0, replace=True, title="Casts that come with ocean_sound, some invented"
    )
    with open_archive(output) as archive:
        save_figure(archive_figure(archive), folder / "archive.png", replace=True)
    yield "8. An archive, for someone filing casts (invented and real casts together)"
    yield f"   {built.casts} casts with {built.levels} levels from {built.files} files in one CF netCDF file;"
    counts = f"left out: {len(built.left_out)}, without a speed: {built.without_speed}"
    yield f"   {counts}, repeated: {len(built.duplicates)}"


def _survey(folder: Path) -> Iterator[str]:
    """A synthetic line across a front, corrected with the first cast and with all; the truth is known."""
    survey = synthetic_survey(kind="front", pings=90, beams=31, max_angle=65.0, cast_every=0.75)
    given, truth, job = survey.soundings, survey.truth, Job(survey.profiles, choice={"scales": FRONT_SCALES})
    one = correct_soundings(given, survey.profiles[0])
    found = correct_soundings(given, survey.profiles, scales=FRONT_SCALES)
    for name, dataset in (("soundings", given), ("corrected", found), ("truth", truth)):
        write_dataset(dataset, folder / f"survey-{name}.nc", replace=True)
    (folder / CASTS).mkdir(exist_ok=True)
    for cast in survey.casts:
        columns = {f"{name} [{unit}]": np.round(cast.values[name], 4) for name, unit in _UNITS.items()}
        about = {"data": INVENTED, "time": f"{cast.time}Z", "latitude": cast.latitude, "longitude": cast.longitude}
        write_csv(folder / CASTS / f"{cast.id}.csv", columns, preamble=about | {"station": cast.id}, replace=True)
    names = ("the first cast alone", "all casts blended")
    picture = swath_figure(one, found, truth=truth, names=names, title="A line across a front", remark=INVENTED)
    save_figure(picture, folder / "survey-swath.png", replace=True)
    outer = passport_of_file(given, job, given.sizes["ping"] // 2, 0)
    save_figure(passport_figure(outer, remark=INVENTED), folder / "survey-passport.png", replace=True)
    yield "3. A survey line of 40 km across a front, for a survey hydrographer (invented, so the truth is known)"
    yield f"   {found.depth.size} soundings, {len(survey.casts)} casts on the way; error of depth, rms:"
    yield "                                 at 65 °    all beams"
    for name, corrected in zip(names, (one, found), strict=True):
        error = (corrected.depth - truth.depth).values
        outermost, whole = (float(np.sqrt(np.mean(each**2))) for each in (error[:, [0, -1]], error))
        yield f"     {name:<22} {100 * outermost:6.1f} cm   {100 * whole:6.1f} cm"
    inside = float((abs(found.depth - truth.depth) <= found.tvu_95).mean())
    yield f"   the truth lies within the stated TVU (95 %) of {inside:.0%} of the soundings"
    left = leave_one_out(survey.profiles, scales=FRONT_SCALES, depth=LEFT_OUT_DEPTH, order="Special")
    yield f"   {left.lines()[3]}"
