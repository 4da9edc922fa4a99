"""The pieces of a page: headings, paragraphs, lists, tables, figures, and the whole.

Text goes in plain and is escaped here, in one place. What these functions return is a `Piece`; only pieces are put
together unescaped.
"""

from __future__ import annotations

import base64
import html
import io
import unicodedata
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from ..files import write_text

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence
    from os import PathLike

    from matplotlib.figure import Figure

_DOTS_PER_INCH = 130
# Nothing is fetched, and nothing runs, whatever a reader's programme would do.
_POLICY = "default-src 'none'; img-src data:; style-src 'unsafe-inline'; base-uri 'none'; form-action 'none'"
_STYLE = """
:root { color-scheme: light; --ink: #1a1a1a; --line: #123a5c; --pale: #dfe5ea; --wash: #f4f6f8; --care: #8a4b08; }
* { box-sizing: border-box; }
body { margin: 0 auto; padding: 1.2rem; max-width: 60rem; color: var(--ink); background: #fff;
  font: 1rem/1.5 system-ui, -apple-system, "Segoe UI", "Liberation Sans", Arial, sans-serif; overflow-wrap: anywhere; }
header { border-bottom: 3px solid var(--line); margin-bottom: 1rem; }
h1 { font-size: 1.7rem; line-height: 1.2; margin: 0 0 .3rem; color: var(--line); }
h2 { font-size: 1.2rem; margin: 2rem 0 .5rem; color: var(--line); border-bottom: 1px solid var(--pale); }
h3 { font-size: 1rem; margin: 1.2rem 0 .3rem; }
header p, figcaption, caption { font-size: .875rem; color: #444; }
p { margin: .4rem 0; max-width: 46rem; }
nav ul { list-style: none; padding: 0; margin: .4rem 0; display: flex; flex-wrap: wrap; gap: .2rem 1rem; }
a { color: var(--line); }
.wide { overflow-x: auto; }
table { border-collapse: collapse; margin: .5rem 0; font-size: .9rem; font-variant-numeric: tabular-nums; }
caption { text-align: left; padding-bottom: .2rem; }
th, td { text-align: left; vertical-align: top; padding: .25rem .8rem .25rem 0; border-bottom: 1px solid var(--pale);
  overflow-wrap: normal; }
td.name, td.long { overflow-wrap: anywhere; }
thead th { border-bottom: 2px solid var(--line); }
td.number, th.number { text-align: right; white-space: nowrap; }
td.long { font-family: ui-monospace, "Liberation Mono", monospace; font-size: .8rem; }
figure { margin: 1rem 0; }
figure img { max-width: 100%; height: auto; display: block; border: 1px solid var(--pale); }
.care { border-left: 5px solid var(--care); background: #fbf3e9; padding: .6rem 1rem; margin: 1rem 0; }
.care h2 { margin-top: 0; color: var(--care); border: 0; }
.short { background: var(--wash); padding: .6rem 1rem; }
.short h2 { margin-top: 0; }
.short p { font-size: 1.05rem; }
footer { margin-top: 2rem; border-top: 1px solid var(--pale); font-size: .85rem; color: #444; }
@media (max-width: 40rem) { body { padding: .8rem; } h1 { font-size: 1.35rem; } }
@media print {
  @page { margin: 16mm 14mm; }
  body { max-width: none; padding: 0; font-size: 10pt; }
  nav { display: none; }
  h2, h3, caption { break-after: avoid; }
  figure, tr, .care, .short { break-inside: avoid; }
  figure img { max-height: 22cm; border: 0; }
  .wide { overflow: visible; }
  thead { display: table-header-group; }
  .care, .short { background: none; border: 1px solid #888; }
}
"""


@dataclass(frozen=True)
class Piece:
    """A part of a page, ready to stand in it."""

    text: str


def plain(value: object) -> str:
    r"""Text for a page: escaped, on one line, without characters that do not print or that turn the reading around.

    Examples
    --------
    >>> plain('<b title="x">\u202e')
    '&lt;b title=&quot;x&quot;&gt;'
    """
    line = " ".join(str(value).split())
    return html.escape("".join(c for c in line if unicodedata.category(c) not in {"Cc", "Cf", "Cs", "Co", "Cn"}))


def together(pieces: Iterable[Piece]) -> Piece:
    """Pieces one after the other."""
    return Piece("\n".join(piece.text for piece in pieces))


def paragraph(text: str) -> Piece:
    """A paragraph."""
    return Piece(f"<p>{plain(text)}</p>")


def subheading(text: str) -> Piece:
    """A heading within a section."""
    return Piece(f"<h3>{plain(text)}</h3>")


def bullets(items: Iterable[str]) -> Piece:
    """A list; nothing if it is empty."""
    lines = [f"<li>{plain(item)}</li>" for item in items]
    return Piece("\n".join(["<ul>", *lines, "</ul>"]) if lines else "")


def facts(rows: Iterable[tuple[str, str]]) -> Piece:
    """Names and what they are, beside each other."""
    lines = [f'<tr><th scope="row">{plain(name)}</th><td class="name">{plain(value)}</td></tr>' for name, value in rows]
    return Piece("\n".join(["<table><tbody>", *lines, "</tbody></table>"]))


def table(heads: Sequence[str], rows: Iterable[Sequence[object]], *, caption: str, numbers: Sequence[int] = (),
          long: Sequence[int] = ()) -> Piece:  # fmt: skip
    """A table.

    Parameters
    ----------
    heads : sequence of str
    rows : iterable of sequences, as long as the heads
    caption : str
    numbers, long : sequence of int
        Columns that are set to the right, and those of long words.
    """

    def kind(column: int) -> str:
        if column in numbers:
            return ' class="number"'
        return ' class="long"' if column in long else ' class="name"'

    top = "".join(
        f'<th scope="col"{kind(k) if k in numbers else ""}>{plain(head)}</th>' for k, head in enumerate(heads)
    )
    lines = []
    for row in rows:
        cells = [f"<td{kind(k)}>{plain(cell)}</td>" for k, (cell, _) in enumerate(zip(row, heads, strict=True))]
        lines.append(f"<tr>{''.join(cells)}</tr>")
    return Piece(
        "\n".join([
            '<div class="wide"><table>', f"<caption>{plain(caption)}</caption>",
            f"<thead><tr>{top}</tr></thead>", "<tbody>", *lines, "</tbody></table></div>",
        ])
    )  # fmt: skip


def picture(figure: Figure, *, shows: str, caption: str) -> Piece:
    """A figure within the page.

    Parameters
    ----------
    figure : matplotlib.figure.Figure
    shows : str
        For those who can't see it.
    caption : str
    """
    content = io.BytesIO()
    figure.savefig(content, format="png", dpi=_DOTS_PER_INCH, metadata={"Software": None})
    data = base64.b64encode(content.getvalue()).decode("ascii")
    width, height = (round(inches * 96) for inches in figure.get_size_inches())
    return Piece(
        f'<figure><img alt="{plain(shows)}" width="{width}" height="{height}" src="data:image/png;base64,{data}">\n'
        f"<figcaption>{plain(caption)}</figcaption></figure>"
    )


def section(name: str, title: str, *pieces: Piece, kind: str = "") -> tuple[str, str, Piece]:
    """A section: its name within the page (letters and hyphens), its title, and itself."""
    style = f' class="{kind}"' if kind else ""
    body = together(piece for piece in pieces if piece.text)
    return name, title, Piece(f'<section id="{name}"{style}>\n<h2>{plain(title)}</h2>\n{body.text}\n</section>')


def page(title: str, lines: Sequence[str], sections: Sequence[tuple[str, str, Piece]], footer: str) -> str:
    """A whole page.

    Parameters
    ----------
    title : str
    lines : sequence of str
        Below it.
    sections : sequence of sections
    footer : str

    Returns
    -------
    str
        HTML; nothing in it is fetched from elsewhere, and nothing runs.
    """
    links = "".join(f'<li><a href="#{name}">{plain(head)}</a></li>' for name, head, _ in sections)
    body = "\n".join(piece.text for _, _, piece in sections)
    under = "\n".join(f"<p>{plain(line)}</p>" for line in lines if line)
    return f"""<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy" content="{_POLICY}">
<meta name="referrer" content="no-referrer">
<title>{plain(title)}</title>
<style>{_STYLE}</style>
</head>
<body>
<header>
<h1>{plain(title)}</h1>
{under}
</header>
<nav aria-label="Contents"><ul>{links}</ul></nav>
<main>
{body}
</main>
<footer><p>{plain(footer)}</p></footer>
</body>
</html>
"""


def write_report(path: str | PathLike[str], text: str, *, replace: bool = False) -> None:
    """Write a page to a file, whole or not at all.

    Parameters
    ----------
    path : path-like
        Ending in .html or .htm.
    text : str
        Of `sensors_report`.
    replace : bool
        Whether an existing file may be replaced.

    Raises
    ------
    InputError
        For another ending.
    OutputError
        If the file exists and may not be replaced, or can't be written.

    Examples
    --------
    >>> import tempfile
    >>> from pathlib import Path
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     goal = Path(folder) / "plan.html"
    ...     write_report(goal, page("A plan", ["In short"], [], "Written by hand"))
    ...     goal.read_text(encoding="utf-8").splitlines()[0]
    '<!DOCTYPE html>'
    """
    check_page(path, replace=replace)
    write_text(path, text, replace=replace)


def check_page(path: Any, *, replace: bool = False) -> None:
    """Refuse a page that could not be written, before any work is done for it.

    Raises
    ------
    InputError, OutputError
        As for `write_report`.
    """
    from pathlib import Path

    from ..errors import InputError
    from ..files import check_output

    if Path(path).suffix.lower() not in {".html", ".htm"}:
        raise InputError(f"{path}: a report is a page of HTML; name it .html")
    check_output(path, replace=replace)
