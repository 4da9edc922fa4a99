"""The page of a sensor plan: what was asked, water, coverage, sites, cautions, and where all came from."""

from __future__ import annotations

from datetime import UTC, datetime
from importlib import metadata
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from ..files import checksum
from .page import Piece, bullets, facts, page, paragraph, picture, section, subheading, table

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence
    from os import PathLike

    from ..profile import Profile
    from ..sensors.planning import SensorPlan

    Section = tuple[str, str, Piece]

CAUTIONS = (
    (
        "Results are as good as the water, the noise, the seabed, the source level and the threshold that were given. "
        "The sea differs from casts that were taken at other times and places; a range test at the site tells more "
        "than any computation."
    ),
    (
        "Whatever makes sound in the sea may be subject to permits and to rules for the protection of marine mammals "
        "and other animals: local law and the competent authorities come first. Ask before anything is moored or "
        "transmits."
    ),
    (
        "Moorings are obstacles: safety of navigation, notices to mariners, fishing, cables, pipelines and protected "
        "areas must be cleared before anything is laid."
    ),
    (
        "Diving, lifting and mooring work are for licensed and trained people by their own rules; nothing on this page "
        "replaces their judgement."
    ),
)
_STEPS = (3.0, 6.0, 10.0, 20.0)  # dB of which is said what they would restore
_MOST_CASTS, _MOST_SITES = 40, 60  # rows of tables that could grow long


def sensors_report(
    plan: SensorPlan,
    *,
    title: str = "",
    remark: str = "",
    inputs: Iterable[str | PathLike[str]] = (),
    sources: Sequence[str] = (),
    notes: Sequence[str] = (),
    figures: bool = True,
    written: datetime | None = None,
) -> str:
    """One page about a sensor plan that a colleague can open, without a network.

    Parameters
    ----------
    plan : SensorPlan
    title : str
        Of the page.
    remark : str
        A few words below it, such as "invented data".
    inputs : iterable of path-like
        The files that went in: they are named with their checksums.
    sources : sequence of str
        Where the data comes from, a line each.
    notes : sequence of str
        What else was assumed, beside the plan's own notes.
    figures : bool
        Whether pictures are drawn.
    written : datetime, optional
        Now, where not given.

    Returns
    -------
    str
        HTML, for `write_report`. All text in it is escaped; it holds its figures, links to nothing and runs nothing.

    Raises
    ------
    InputError
        If an input can't be read.
    """
    told = plan.summary()
    dataset = plan.to_dataset() if figures else None
    sections = [
        _short(plan, told),
        section("cautions", "Cautions", bullets(CAUTIONS), kind="care"),
        _asked(plan, told),
        _water(plan, [*notes, *plan.notes]),
        _coverage(plan, told, dataset),
        _sites(plan, told, dataset),
        *_deaf(plan, told),
        _provenance(inputs, sources, plan, told),
    ]
    when = (datetime.now(UTC) if written is None else written).strftime("%Y-%m-%d %H:%M UTC")
    by = f"ocean_sound {metadata.version('ocean_sound')}"
    return page(
        title or "Sensor plan",
        [remark, f"Where sensors hear, and where they do not. Written {when} by {by}."],
        sections,
        f"Written {when} by {by}. This page needs no network and no scripts.",
    )


def _percent(part: float) -> str:
    return f"{100.0 * part:.1f} %" if np.isfinite(part) else "unknown"


def _place(latitude: float, longitude: float) -> str:
    if not (np.isfinite(latitude) and np.isfinite(longitude)):
        return "unknown"
    east = (longitude + 180.0) % 360.0 - 180.0
    return f"{abs(latitude):.4f}° {'N' if latitude >= 0 else 'S'} {abs(east):.4f}° {'E' if east >= 0 else 'W'}"


def _list(values: Iterable[float]) -> str:
    return ", ".join(f"{float(value):.4g}" for value in values)


def _km(metres: float) -> str:
    return f"{metres / 1000.0:.2f}"


def _short(plan: SensorPlan, told: dict[str, Any]) -> Section:
    there = len(plan.sensors) - len(plan.chosen)
    count = len(plan.chosen)
    sensors = f"{count} sensor{'s' if count != 1 else ''}"
    old = f" and {there} that {'was' if there == 1 else 'were'} there before" if there else ""
    first = (
        f"With {sensors}{old}, at least one hears a signal with a probability of {plan.level:g} or more over "
        f"{_percent(told['covered']['1'])} of the area, weighted by where it spends its time."
    )
    lines = [paragraph(first)]
    if "choice" in told:
        lines.append(paragraph(f"Choice: {told['choice']['method']}, {'; '.join(told['choice']['notes'])}."))
    return section("short", "In short", *lines, kind="short")


def _asked(plan: SensorPlan, told: dict[str, Any]) -> Section:
    task = plan.task
    area, hearing, settings = task.area, task.hearing, task.settings
    target, receiver, noise = hearing.target, hearing.receiver, hearing.noise
    box = "; ".join(
        _place(float(lat), float(lon))
        for lat, lon in ((area.latitude[0], area.longitude[0]), (area.latitude[-1], area.longitude[-1]))
    )
    heard = [
        f"threshold {receiver.detection_threshold:g} dB (half are detected) in a band of {receiver.bandwidth:g} Hz"
    ]
    if receiver.integration_time is not None:
        heard.append(f"over {receiver.integration_time:g} s")
    if receiver.directivity_index:
        heard.append(f"directivity {receiver.directivity_index:g} dB")
    if receiver.self_noise is not None:
        heard.append(f"own noise {receiver.self_noise:g} dB re 1 µPa²/Hz")
    levels = f"{_list(noise.levels)} dB re 1 µPa²/Hz for {_list(100 * noise.shares)} % of the time"
    bearings = f"{settings.bearings} bearings to {settings.max_range / 1000.0:g} km"
    old = f" and {len(task.existing)} existing sensors" if task.existing else ""
    rows = [
        ("area", f"{told['area_km2']:.5g} km² in {told['cells']} cells, between {box}"),
        ("depths of what is heard", f"{_list(area.depths)} m, for {_list(100 * area.shares)} % of the time"),
        ("source level", f"{target.source_level:g} dB re 1 µPa at 1 m, at {settings.frequency:g} Hz"),
        ("signals", _signals(plan)),
        ("receiver", ", ".join(heard)),
        ("noise of the sea", f"{levels}; calm sea {noise.calm:.4g} dB"),
        ("fluctuation", f"{hearing.fluctuation:g} dB, correlation between sensors {hearing.correlation:g}"),
        ("computed", f"{bearings} from each of {told['candidates']} candidates{old}"),
        ("mooring", _mooring(plan)),
        ("wanted", _wanted(plan)),
    ]
    return section("asked", "What was asked", facts([row for row in rows if row[1]]))


def _signals(plan: SensorPlan) -> str:
    target = plan.task.hearing.target
    words = [f"{target.calls} chance{'s' if target.calls > 1 else ''} to be heard"]
    if target.pulses > 1:
        words.append(f"codes of {target.pulses} pulses, all of which must arrive")
    if target.transmitters > 1:
        words.append(
            f"{target.transmitters} transmitters within hearing, each for {target.duration:g} s every "
            f"{target.interval:g} s"
        )
    return "; ".join(words)


def _mooring(plan: SensorPlan) -> str:
    down = plan.task.knockdown
    if not (down.depth and down.share):
        return ""
    return f"pushed down by {down.depth:g} m for {_percent(down.share)} of the time"


def _wanted(plan: SensorPlan) -> str:
    wanted = plan.task.wanted
    if wanted is None:
        return "all sites"
    words = [f"at most {wanted.number} sites", f"covered means {wanted.at_once} at once with {wanted.level:g} or more"]
    if wanted.budget is not None:
        words.append(f"budget {wanted.budget:g}")
    if wanted.spacing:
        words.append(f"at least {wanted.spacing:g} m apart")
    if wanted.must_cover:
        places = "; ".join(_place(lat, lon) for lat, lon in wanted.must_cover)
        words.append(f"must cover {places}")
    return ", ".join(words)


def _water(plan: SensorPlan, notes: Sequence[str]) -> Section:
    rows = []
    total = sum(member.share for member in plan.task.members)
    for member in plan.task.members:
        rows += [[member.name, member.group, _percent(member.share / total), *_cast(one)] for one in member.profiles]
    pieces = [
        table(
            ["water", "group", "share", "cast", "time", "place", "reaches (m)", "speed (m/s)", "equation"],
            rows[:_MOST_CASTS],
            caption=f"Waters that were computed{_cut(len(rows), _MOST_CASTS, 'casts')}",
            numbers=(2, 6, 7),
        ),
        paragraph(_seabed(plan)),
    ]
    if notes:
        pieces += [subheading("Notes"), bullets(dict.fromkeys(notes))]
    return section("water", "The water and the seabed", *pieces)


def _cast(profile: Profile) -> list[str]:
    known = profile.about()
    speeds = f"{profile.speed.min():.1f} to {profile.speed.max():.1f}"
    return [
        str(known["cast_id"] or ""), str(known["time"] or "").replace("T", " "),
        _place(profile.latitude, profile.longitude), f"{profile.depth[-1]:.0f}", speeds,
        str(known["equation"] or "as given"),
    ]  # fmt: skip


def _seabed(plan: SensorPlan) -> str:
    bathymetry, kind = plan.task.bathymetry, plan.task.settings.kind
    where = (
        f"Level seabed at {bathymetry:g} m" if isinstance(bathymetry, int | float)
        else f"Seabed from the grid {Path(str(bathymetry.grid.path)).name}"
    )  # fmt: skip
    made = "absorbs all sound" if kind is None else f"made of {kind}" if isinstance(kind, str) else f"made of {kind!r}"
    return f"{where}, {made}. Wind at the surface: {plan.task.settings.wind_speed:g} m/s."


def _cut(count: int, most: int, what: str) -> str:
    return f" (the first {most} of {count} {what})" if count > most else ""


def _coverage(plan: SensorPlan, told: dict[str, Any], dataset: Any) -> Section:
    pieces = []
    if dataset is not None:
        from ..figures import coverage_map_figure

        pieces.append(
            picture(
                coverage_map_figure(dataset, level=plan.level),
                shows=f"Map: {_percent(told['covered']['1'])} of the weighted area is covered by at least one sensor.",
                caption="Probability that at least one sensor hears one, mean over depths and waters. White within the "
                "area: no water at these depths.",
            )
        )
    rows = [
        [f"at least {count}", _percent(share), _percent(told["mean_probability"][count])]
        for count, share in told["covered"].items()
        if int(count) <= len(plan.sensors)
    ]
    pieces.append(
        table(
            ["sensors that hear", f"area with {plan.level:g} or more", "mean probability"],
            rows, caption="Coverage, weighted by area and time at depth", numbers=(1, 2),
        )
    )  # fmt: skip
    groups = told["mean_probability_by_group"]
    if groups:
        pieces.append(
            table(
                ["group of waters", "mean probability"], [[name, _percent(share)] for name, share in groups.items()],
                caption="By season or other group, at least one sensor", numbers=(1,),
            )
        )  # fmt: skip
    if told["waters"] > 1:
        spread = 100.0 * told["spread_over_waters"]
        pieces.append(
            paragraph(f"From water to water the mean probability varies by {spread:.1f} % (standard deviation).")
        )
    return section("coverage", "Coverage", *pieces)


def _sites(plan: SensorPlan, told: dict[str, Any], dataset: Any) -> Section:
    rows = []
    for site, sensor in zip(plan.sensors, told["sensors"], strict=True):
        adds = "was there" if sensor["existing"] else ("" if sensor["gain"] is None else _percent(sensor["gain"]))
        reach = [_km(value) for value in sensor["detection_range"].values()]
        rows.append([
            site.name, f"{site.latitude:.5f}", f"{(site.longitude + 180.0) % 360.0 - 180.0:.5f}", f"{site.depth:.0f}",
            f"{site.cost:g}", adds, *reach,
        ])  # fmt: skip
    percentiles = list(told["sensors"][0]["detection_range"]) if told["sensors"] else []
    heads = ["sensor", "latitude", "longitude", "depth (m)", "cost", "adds"]
    heads += [f"range (km), {name.replace('%', ' %')}" for name in percentiles]
    pieces = [
        table(
            heads, rows[:_MOST_SITES], numbers=tuple(range(1, len(heads))),
            caption="Sensors, chosen ones first, in the order of what each adds to those before it; ranges are medians "
            f"over bearings{_cut(len(rows), _MOST_SITES, 'sensors')}",
        )
    ]  # fmt: skip
    if dataset is not None:
        pieces += _site_pictures(plan, dataset)
    return section("sites", "The sites", *pieces)


def _site_pictures(plan: SensorPlan, dataset: Any) -> list[Piece]:
    from ..figures import detection_range_figure, detection_section_figure, gain_figure

    found = []
    if plan.choice is not None and plan.choice.sites:
        found.append(
            picture(
                gain_figure(plan), shows="Chart: what each further sensor adds; the table above has the numbers.",
                caption="What each further sensor adds to those before it. Sensors are counted one by one here: "
                "several together may reach it where none does alone, so the coverage above may be larger.",
            )
        )  # fmt: skip
    found.append(
        picture(
            detection_range_figure(dataset),
            shows="Roses: detection range over bearing for each sensor; the table above has the medians.",
            caption="Distance to which the probability is reached without a break; its spread over waters and noise.",
        )
    )
    found.append(
        picture(
            detection_section_figure(plan),
            shows=f"Section: loss along one bearing of {plan.sensors[0].name}, with the line of detection.",
            caption="Loss along one bearing of the first sensor. A source anywhere in the picture is heard there "
            "with the loss shown there (reciprocity).",
        )
    )
    return found


def _deaf(plan: SensorPlan, told: dict[str, Any]) -> list[Section]:
    if "why_deaf" not in told:
        return []
    rows = [[name, _percent(share)] for name, share in told["why_deaf"].items() if share > 0.0]
    if not rows:
        return [section("deaf", "Why deaf", paragraph("Half of all signals or more are heard everywhere."))]
    return [
        section(
            "deaf",
            "Why deaf",
            table(
                ["main cause", "part of the area"], rows, numbers=(1,),
                caption="Where the best sensor hears less than half of all signals, by what takes most of the sound",
            ),
            *_cure(plan),
        )
    ]  # fmt: skip


def _cure(plan: SensorPlan) -> list[Piece]:
    """How many decibels would restore how much."""
    found, cure = plan.deafness, plan.cures
    if found is None or cure is None:
        return []
    shares = np.array([member.share for member in plan.task.members], dtype=np.float64)
    weight = np.outer(shares / shares.sum(), plan.task.area.weight / plan.task.area.weight.sum())
    deaf = found.cause >= 0
    restored = {step: float(weight[deaf & (-cure.threshold <= step)].sum()) for step in _STEPS}
    rows = [[f"{step:g} dB", _percent(share)] for step, share in restored.items()]
    moved = float(weight[deaf & np.isfinite(cure.depth)].sum())
    placed = float(weight[deaf & np.isfinite(cure.place)].sum())
    return [
        table(["threshold lower by", "part of the area restored"], rows, numbers=(1,),
              caption="What a better receiver, a louder source or less noise would restore"),
        paragraph(
            f"Another depth at a sensor's place, of those computed, would restore {_percent(moved)} of the area; "
            f"another candidate site {_percent(placed)}."
        ),
    ]  # fmt: skip


def _provenance(
    inputs: Iterable[str | PathLike[str]], sources: Sequence[str], plan: SensorPlan, told: dict[str, Any]
) -> Section:
    rows = [[Path(path).name, checksum(path)] for path in inputs]
    sections = told["sections"]
    pieces = [
        table(["file", "SHA-256"], rows, caption="Input files", long=(1,)) if rows else Piece(""),
        bullets(sources),
        facts([
            ("programme", f"ocean_sound {metadata.version('ocean_sound')}"),
            ("losses", f"{sections['computed']} sections computed for this page, {sections['kept']} from disk"),
            ("method", f"{plan.task.settings.method}, phases {plan.task.settings.phases}"),
        ]),
    ]  # fmt: skip
    return section("provenance", "Where this comes from", *pieces)
