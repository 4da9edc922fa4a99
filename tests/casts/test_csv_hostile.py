"""Broken and hostile CSVs in processes with little memory: each is read as flagged casts, or refused in one line."""

import json
import os
import subprocess
import sys

import pytest

LIMIT = 10**9  # bytes of address space, the interpreter and its libraries included
SECONDS = 100

HEADS = "depth [m],temperature [degC],salinity [PSS-78]"
ROWS = [f"{10 * i},{15 - i},{34 + i / 10:.1f}" for i in range(8)]
GOOD = "\n".join([HEADS, *ROWS, ""])
PREAMBLE = "cast_id: A\nlatitude: 54 30.5 N\nlongitude: 8 W\ndate: 2026-01-31\nship: none\n"
SEVERAL = "cast,lat,lon,time,depth,temp\n" + "".join(
    f"{name},54.5,-8,2026-01-31T12:0{i}Z,{i},{10 - i}\n" for name in "ABC" for i in range(3)
)
NUMBERS = [
    *("1e308", "-1e308", "1e309", "1e-400", "inf", "-inf", "nan", "0x10", "1_000", "１２", "−1.5", "–1.5", "+-1", "1e"),
    *("1,5", "1.2.3", ".", "-", "e5", "1e99999999999", "9" * 400, "0." + "0" * 400 + "1", "1d5", "True", "#N/A"),
    *(
        "٣",
        "½",
        "1 2",
        "1\u00a0000",
        "\u200b1",
        "12.5°C",
        "<5",
        "~5",
        "5*",
        "(5)",
        "'5",
        "$5",
        "5%",
        "--5",
        "5-",
        "1/2",
    ),
]
DATES = ["03/04/2026", "2026-13-01", "0000-01-01", "9999-12-31", "31/02/2026", "now", "1e9", "2026", "x" * 9999]
POSITIONS = [
    "95",
    "54 60 N",
    "54 30 E",
    "-54 N",
    "1e400",
    "nan",
    "NaN N",
    "54;30",
    "54,5",
    "°",
    "N",
    "1 2 3 4",
    "-" * 99,
]


def replaced(place, text, of=GOOD):
    """The text with a cell of its third row replaced."""
    lines = of.split("\n")
    cells = lines[3].split(",")
    cells[place] = text
    lines[3] = ",".join(cells)
    return "\n".join(lines)


def cases():
    """Names and contents; those of bytes are written as they are."""
    yield from ((f"cut at {n}", GOOD[:n]) for n in range(0, len(GOOD), 7))
    yield from ((f"preamble cut at {n}", (PREAMBLE + GOOD)[:n]) for n in range(3, len(PREAMBLE) + 60, 9))
    yield from ((f"number {text[:20]}", replaced(1, text)) for text in NUMBERS)
    yield from ((f"depth {text[:20]}", replaced(0, text)) for text in NUMBERS)
    yield from ((f"date {text[:20]}", f"date: {text}\n{GOOD}") for text in DATES)
    yield from ((f"time column {text[:20]}", f"time,depth,temp\n{text},0,1\n,1,2\n") for text in DATES)
    yield from ((f"latitude {text[:20]}", f"latitude: {text}\n{GOOD}") for text in POSITIONS)
    yield from ((f"longitude column {text[:20]}", f"lon,depth,temp\n{text},0,1\n,1,2\n") for text in POSITIONS)
    yield from ((f"byte {byte:02x} at {place}", GOOD.encode()[:place] + bytes([byte]) + GOOD.encode()[place:])
                for byte in (0, 1, 0x1A, 0x7F, 0x80, 0xC3, 0xFE, 0xFF) for place in (0, 20, 60))  # fmt: skip
    for name in ("utf-16", "utf-16-le", "utf-16-be", "utf-32", "utf-7", "utf-8-sig", "cp500"):
        yield f"in {name}", GOOD.encode(name)
    for mark in "\r \t;|,\x0b\x0c\x85\u2028\u00a0":
        yield f"rows parted by {mark!r}", GOOD.replace("\n", mark)
        yield f"cells parted by {mark!r}", GOOD.replace(",", mark)
    for count in (1, 2, 3):
        yield f"glued {count}", GOOD * (count + 1)
        yield f"glued with preamble {count}", (PREAMBLE + GOOD) * (count + 1)
        yield f"ids glued {count}", SEVERAL * (count + 1)
    yield "upwards", "\n".join([HEADS, *reversed(ROWS)])
    yield "shuffled rows", "\n".join([HEADS, *ROWS[::2], *ROWS[1::2]])
    yield "shuffled columns", "\n".join(",".join(line.split(",")[::-1]) for line in [HEADS, *ROWS])
    yield "shuffled cells", "\n".join([HEADS, *(",".join(row.split(",")[::-1]) for row in ROWS)])
    yield "heads last", "\n".join([*ROWS, HEADS])
    yield "heads in the middle", "\n".join([*ROWS[:4], HEADS, *ROWS[4:]])
    yield "duplicate heads", GOOD.replace("salinity", "temperature")
    yield "the same head everywhere", GOOD.replace(HEADS, "depth,depth,depth")
    yield "empty heads", GOOD.replace(HEADS, ",,")
    yield "empty head beside", GOOD.replace("salinity [PSS-78]", "")
    yield "unknown unit", GOOD.replace("[m]", "[league]")
    yield "wrong unit", GOOD.replace("[m]", "[degC]")
    yield "broken bracket", GOOD.replace("[m]", "[m")
    yield "nested brackets", GOOD.replace("[m]", "[" * 3000 + "m" + "]" * 3000)
    yield "head of blanks", GOOD.replace("depth", "depth" + " " * 100_000)
    yield "long head", GOOD.replace("depth", "x" * 100_000)
    yield "long unit", GOOD.replace("[m]", f"[{'m' * 100_000}]")
    yield "negative depths", GOOD.replace("\n", "\n-")
    yield "heads only", HEADS + "\n"
    yield "heads and units only", "depth,temp\nm,degC\n"
    yield "commas only", ",,\n" * 50
    yield "quotes only", '"' * 999
    yield "open quote", GOOD.replace("temp", '"temp')
    yield "quote in a cell", replaced(1, '1"5')
    yield "quoted line ends", GOOD.replace("10,14", '"10\n",14')
    yield "quoted everything", "\n".join(",".join(f'"{c}"' for c in line.split(",")) for line in [HEADS, *ROWS])
    yield "html", "<html><body><table><tr><td>depth</td></tr></table></body></html>\n"
    yield "json", json.dumps({"depth": [0, 1], "temperature": [1, 2]})
    yield "ragged", GOOD.replace("10,14,", "10,14")
    yield "too wide", GOOD.replace("10,14,", "10,14,5,")
    yield "decimal commas in a comma table", GOOD.replace(".1", ",1")
    yield "thousands", "depth;temp\n1.234,5;1\n2.345,6;2\n"
    yield "flags unknown", GOOD.replace("salinity [PSS-78]", "temp QC")
    yield "flags out of range", "depth,temperature,temperature_flag\n0,1,1\n1,2,77\n"
    yield "flags broken", "depth,temperature,temperature_flag\n0,1,1.5\n1,2,x\n"
    yield "flags huge", "depth,temperature,temperature_flag\n0,1,1e300\n1,2,-1\n"
    yield "ids glued together", SEVERAL.replace("\nB", "\nA")
    yield "ids of blanks", SEVERAL.replace("\nA", "\n ")
    yield "ids huge", SEVERAL.replace("\nA", "\n" + "A" * 50_000)
    yield "each row a cast", "cast,depth,temp\n" + "".join(f"{i},1,2\n" for i in range(20_000))
    yield "positions far apart", SEVERAL.replace("B,54.5", "B,-54.5")
    yield "preamble without end", "key: value\n" * 10_000 + GOOD
    yield "comments without end", "# nothing\n" * 10_000 + GOOD
    yield "blank lines without end", "\n" * 100_000 + GOOD
    yield "one huge line", "1," * 10_000_000
    yield "one huge word", "x" * 20_000_000
    yield "one huge number", HEADS + "\n0,1," + "9" * 10_000_000 + "\n"
    yield "huge line after good ones", GOOD + "1," * 10_000_000
    yield "a million columns", ",".join(f"c{i}" for i in range(10**6)) + "\n" + ",".join("1" * 10**6) + "\n"
    yield "a million columns of depth", ",".join(["depth"] * 10**6) + "\n" + ",".join("1" * 10**6) + "\n"
    yield "three thousand columns", ",".join(["depth", "temp", *map(str, range(3000))]) + "\n"
    yield "many columns", ",".join(["depth", "temp", *(f"c{i}" for i in range(3000))]) + "\n" + ",".join(["1"] * 3002)
    yield "words without end", " ".join(["depth", "temp"] * 5_000_000)
    yield "many rows", HEADS + "\n" + "".join(f"{i},15,35\n" for i in range(200_000))
    yield "many rows with gaps", HEADS + "\n" + "".join(f"{i},,35\n" for i in range(200_000))
    yield "many empty rows", HEADS + "\n" + ",,\n" * 1_000_000
    yield "many rows of long numbers", HEADS + "\n" + "0.12345678901234567,1,2\n" * 200_000
    yield "many quotes", HEADS + "\n" + '"1","2","3"\n' * 100_000
    yield "many semicolons", "depth;temp\n" + "1,5;2,5\n" * 100_000
    yield "zeros", bytes(10_000_000)


# Each is read by itself and among others; what is neither flagged nor refused in a line is told.
CHILD = """
import json, resource, sys, warnings
from pathlib import Path
import numpy as np
from ocean_sound.casts import read_blocks, read_many
from ocean_sound.errors import CastFileError, InputError
warnings.simplefilter("error")
resource.setrlimit(resource.RLIMIT_AS, (MOST, MOST))

def told(casts, name):
    for cast in casts:
        for key, column in cast.values.items():
            gaps = ~np.isfinite(column)
            if gaps.any() and not (cast.flags[key][gaps] == 9).all():
                return f"{name}: a gap of {key} is not flagged"
        if not any(np.isfinite(column).any() for column in cast.values.values()):
            return f"{name}: a cast of nothing"
    return None

for path in sorted(Path(sys.argv[1]).iterdir()):
    found = []
    for way, read in (("alone", read_blocks), ("many", lambda path: read_many([path]))):
        reasons = []
        try:
            for block in read(path):
                reasons += [why for _, why in block.left_out]
                count = len(block)
                fault = told(block if count < 100 else block[:100], path.name)
                if fault:
                    print(json.dumps([path.name, fault]))
            found.append(["read", count] if count else ["refused", reasons[0]])
        except (CastFileError, InputError) as error:
            reasons.append(str(error))
            found.append(["refused", str(error).removeprefix(f"{path}: ")])
        except BaseException as error:
            print(json.dumps([path.name, f"{way}: {type(error).__name__}: {error}"[:500]]))
            found.append(["failed", ""])
        for reason in reasons:
            if "\\n" in reason or not reason or len(reason) > 2500:
                print(json.dumps([path.name, f"{way}: not one short line: {reason[:200]!r}"]))
    if found[0] != found[1]:
        print(json.dumps([path.name, f"differs: {str(found)[:500]}"]))
    print(json.dumps([path.name, found[0][0]]))
"""


@pytest.fixture(scope="module")
def names():
    return [name for name, _ in cases()]


def test_there_are_enough_cases(names):
    assert len(names) == len(set(names)) >= 150


@pytest.mark.parametrize("part", range(3))
@pytest.mark.skipif(sys.platform == "win32", reason="limits of memory are set as on Unix")
def test_each_is_flagged_or_refused_in_one_line(tmp_path, part):
    expected = {}
    for number, (name, content) in enumerate(cases()):
        if number % 3 == part:
            path = tmp_path / f"{number:03d}.csv"
            path.write_bytes(content if isinstance(content, bytes) else content.encode())
            expected[path.name] = name
    done = subprocess.run(
        [sys.executable, "-c", CHILD.replace("MOST", str(LIMIT)), str(tmp_path)],
        capture_output=True,
        text=True,
        check=False,
        timeout=SECONDS,
        env=os.environ | {"OPENBLAS_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"},
    )
    assert done.returncode == 0, done.stderr[-2000:]
    outcomes = [json.loads(line) for line in done.stdout.splitlines()]
    faults = {f"{expected[name]}: {what}" for name, what in outcomes if what not in {"read", "refused"}}
    assert faults == set()
    assert {name for name, what in outcomes if what in {"read", "refused"}} == set(expected)
