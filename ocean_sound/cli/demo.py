"""`ocean-sound demo`: the whole of it on an invented survey and a real open cast."""

from __future__ import annotations

from pathlib import Path

import click

from . import _shared as shared


@click.command("demo", short_help="Run everything on an invented survey and a real open cast.")
@shared.options(
    click.option(
        "-o",
        "--output",
        type=click.Path(path_type=Path),
        default=Path("ocean-sound-demo"),
        show_default=True,
        help="Folder for the results; one that an earlier demo made is written over.",
    ),
    shared.replace_option,
    shared.json_option,
    shared.debug_option,
)
def command(output: Path, replace: bool, as_json: bool) -> None:
    """Run the whole of it: casts to profiles, rays, shadow zones and figures, in a folder of results.

    \b
    Example:
      ocean-sound demo -o first-look

    The survey is invented and marked so; the last part reads a real open cast. Nothing is fetched from anywhere.
    """
    from ..demo import run_demo

    summary = run_demo(output, replace=replace, progress=shared.tell)
    files = sorted(path.name for path in output.iterdir())
    lines = [summary, f"Everything is in {output}{'' if output.is_absolute() else ' (below this folder)'}."]
    shared.show({"folder": str(output), "files": files, "summary": summary}, lines, as_json=as_json)
