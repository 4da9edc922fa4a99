"""The profiles that come with the package: inside it when installed plainly, else at the top of the repository."""

from __future__ import annotations

from pathlib import Path

from ..errors import InputError

_DATA_ENDINGS = {".csv", ".nc", ".zip"}


def _folder() -> Path:
    package = Path(__file__).resolve().parent.parent
    inside = package / "profiles"
    if inside.is_dir():
        return inside
    beside = package.parent / "profiles"
    # Beside an installed package lie the folders of other packages: only a repository's own folder counts.
    if beside.is_dir() and (package.parent / "pyproject.toml").is_file():
        return beside
    raise InputError(
        f"the profiles that come with the package are missing (looked in {inside}); install the package again"
    )


def packaged_profiles() -> list[str]:
    """Names of the casts and profiles that come with the package, sorted.

    Returns
    -------
    list of str
        Paths relative to the profiles folder, with forward slashes; each can be given to `packaged_profile`.

    Raises
    ------
    InputError
        The folder is missing from the installation.
    """
    folder = _folder()
    return sorted(path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.suffix in _DATA_ENDINGS)


def packaged_profile(name: str) -> Path:
    """Where a cast or profile that comes with the package lies.

    Parameters
    ----------
    name : str
        A name from `packaged_profiles`, or its file name alone, with or without the ending, where that is unique.

    Returns
    -------
    pathlib.Path
        An existing file.

    Raises
    ------
    InputError
        There is no such profile, or several share the name; the message lists the choices.
    """
    folder, names = _folder(), packaged_profiles()
    if name in names:
        return folder / name
    found = [known for known in names if name in {Path(known).name, Path(known).stem}]
    if len(found) == 1:
        return folder / found[0]
    trouble = "several profiles are" if found else "no profile that comes with the package is"
    raise InputError(f"{trouble} named {name!r}; choose one of: {', '.join(found or names) or '(none)'}")
