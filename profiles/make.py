"""Write the computed files of this folder anew: munk.csv and the casts in invented/.

Run it as `python profiles/make.py`; it needs numpy and gsw. Nothing here was measured. Every number follows from the
formulas below, so that the same files come out each time; a test compares them.
"""

from __future__ import annotations

from pathlib import Path

import gsw
import numpy as np

FOLDER = Path(__file__).parent

INVENTED = "INVENTED for demonstrations; computed by profiles/make.py, measured nowhere; not for navigation"


def munk() -> tuple[np.ndarray, np.ndarray]:
    """Depth (m) and speed (m/s) of Munk's canonical profile, every 10 m to 5000 m.

    c = 1500 (1 + 0.00737 (eta - 1 + exp(-eta))), eta = 2 (z - 1300) / 1300: Munk (1974), Sound channel in an
    exponentially stratified ocean, with application to SOFAR, J. Acoust. Soc. Am. 55, 220-226, with the constants used
    since.
    """
    depth = np.arange(0.0, 5000.5, 10.0)
    eta = 2.0 * (depth - 1300.0) / 1300.0
    return depth, 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta)))


def _step(pressure: np.ndarray, middle: float, thickness: float) -> np.ndarray:
    """A smooth step from 0 above to 1 below; most of it within the thickness (dbar)."""
    return 0.5 * (1.0 + np.tanh(2.0 * (pressure - middle) / thickness))


def _stepped(pressure: np.ndarray, length: float) -> np.ndarray:
    """Pressure bent into gentle steps: water that was stable on it stays stable, and looks stirred."""
    turn = 2.0 * np.pi * pressure / length
    return pressure - length * (0.55 * np.sin(turn) + 0.1 * np.sin(2.7 * turn + 1.0)) / (2.0 * np.pi)


def fjord() -> dict[str, np.ndarray]:
    """Ostray Firth, at the head: river water over salt water, and a cold basin below the sill."""
    pressure = np.arange(0.5, 172.1, 0.5)
    bent = _stepped(pressure, 3.1)
    conservative = 13.6 - 4.1 * _step(bent, 6.0, 7.0) - 1.9 * _step(bent, 32.0, 30.0) - 0.002 * pressure
    absolute = 9.5 + 22.4 * _step(bent, 4.5, 5.0) + 2.2 * _step(bent, 30.0, 34.0) + 0.0015 * pressure
    return _measured(pressure, conservative, absolute, longitude=-10.402, latitude=56.131)


def shelf(lowered: float = 0.0) -> dict[str, np.ndarray]:
    """Ostray Edge, on the outer shelf in summer: a mixed layer over a sharp thermocline."""
    pressure = np.arange(1.0, 204.5, 1.0)
    bent = _stepped(np.maximum(pressure - lowered, 0.0), 5.3)
    below = np.maximum(0.0, bent - 21.0)
    conservative = 15.4 - 5.3 * _step(bent, 31.0, 13.0) * (1.0 - np.exp(-below / 3.0)) - 0.0035 * below
    absolute = 35.31 + 0.14 * _step(bent, 34.0, 30.0) + 0.0005 * pressure
    return _measured(pressure, conservative, absolute, longitude=-11.258, latitude=56.024)


def shelf_later() -> dict[str, np.ndarray]:
    """Ostray Edge eight hours later: the internal tide has pushed the thermocline down by 9 m."""
    return shelf(lowered=9.0)


def basin() -> dict[str, np.ndarray]:
    """Ostray Deep, beyond the slope: a sound channel with room below it."""
    pressure = np.concatenate(
        (np.arange(2.0, 200.0, 2.0), np.arange(200.0, 1000.0, 5.0), np.arange(1000.0, 4221.0, 20.0))
    )
    bent = _stepped(pressure, 23.0)
    conservative = (
        2.15
        + 4.6 * np.exp(-np.maximum(0.0, bent - 30.0) / 900.0)
        + 3.9 * (1.0 - _step(bent, 760.0, 700.0))
        + 4.9 * (1.0 - _step(bent, 52.0, 38.0) * (1.0 - np.exp(-np.maximum(0.0, bent - 32.0) / 8.0)))
        - 0.00002 * pressure
    )
    absolute = (
        35.09
        + 0.45 * np.exp(-np.maximum(0.0, bent - 30.0) / 800.0)
        - 0.02 * (1.0 - _step(bent, 52.0, 38.0))
        + 0.00035 * np.minimum(pressure, 30.0)
    )
    return _measured(pressure, conservative, absolute, longitude=-13.510, latitude=55.672)


def _measured(
    pressure: np.ndarray, conservative: np.ndarray, absolute: np.ndarray, *, longitude: float, latitude: float
) -> dict[str, np.ndarray]:
    """The columns as a cast would give them: ITS-90 temperature and practical salinity, to four decimals."""
    return {
        "pressure [dbar]": pressure,
        "temperature [degC]": np.round(gsw.t_from_CT(absolute, conservative, pressure), 4),
        "salinity [PSS-78]": np.round(gsw.SP_from_SA(absolute, pressure, longitude, latitude), 4),
    }


CASTS = {
    "ostray_firth.csv": (fjord, "OF-03", "2024-08-12T07:40:00Z", 56.131, -10.402),
    "ostray_edge.csv": (shelf, "OE-11", "2024-08-13T10:05:00Z", 56.024, -11.258),
    "ostray_edge_later.csv": (shelf_later, "OE-14", "2024-08-13T18:10:00Z", 56.024, -11.258),
    "ostray_deep.csv": (basin, "OD-27", "2024-08-15T16:20:00Z", 55.672, -13.510),
}


def text_of(columns: dict[str, np.ndarray], preamble: list[str]) -> str:
    """A CSV table; numbers as short as they can be and still read back to the last bit."""
    rows = zip(*(column.tolist() for column in columns.values()), strict=True)
    return "\n".join([*preamble, ",".join(columns), *(",".join(map(repr, row)) for row in rows)]) + "\n"


def texts() -> dict[str, str]:
    """The text of each file by its path in this folder."""
    depth, speed = munk()
    made = {
        "munk.csv": text_of(
            {"depth [m]": depth, "sound_speed [m/s]": speed},
            ["# title: the canonical profile of Munk (1974, J. Acoust. Soc. Am. 55, 220-226), by profiles/make.py"],
        )
    }
    for name, (cast, station, time, latitude, longitude) in CASTS.items():
        title = (cast.__doc__ or "").strip().rstrip(".")
        where = [f"# time: {time}", f"# latitude: {latitude}", f"# longitude: {longitude}", f"# station: {station}"]
        made[f"invented/{name}"] = text_of(cast(), [f"# data: {INVENTED}", f"# title: {title}", *where])
    return made


def main() -> None:
    """Write every computed file."""
    for name, text in texts().items():
        (FOLDER / name).write_text(text, encoding="utf-8", newline="\n")


if __name__ == "__main__":
    main()
