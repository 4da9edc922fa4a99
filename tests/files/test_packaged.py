import pytest

from ocean_sound.errors import InputError
from ocean_sound.files import packaged, packaged_profile, packaged_profiles


@pytest.fixture
def folder(tmp_path, monkeypatch):
    """A package installed in editable mode, with its profiles at the top of the repository."""
    for name in ("munk.csv", "observed/a.csv", "observed/a.nc", "observed/b.csv", "observed/README.md"):
        path = tmp_path / "profiles" / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text("x")
    (tmp_path / "pyproject.toml").write_text("")
    (tmp_path / "ocean_sound" / "files").mkdir(parents=True)
    monkeypatch.setattr(packaged, "__file__", str(tmp_path / "ocean_sound" / "files" / "packaged.py"))
    return tmp_path


def test_names_without_the_readme(folder):
    assert packaged_profiles() == ["munk.csv", "observed/a.csv", "observed/a.nc", "observed/b.csv"]


def test_found_by_path_file_name_or_stem(folder):
    for name in ("observed/b.csv", "b.csv", "b"):
        assert packaged_profile(name) == folder / "profiles" / "observed" / "b.csv"


def test_inside_the_package_wins(folder):
    inside = folder / "ocean_sound" / "profiles"
    inside.mkdir()
    (inside / "other.csv").write_text("x")
    assert packaged_profiles() == ["other.csv"]


def test_unknown_and_ambiguous_names(folder):
    with pytest.raises(InputError, match=r"no profile .* named 'c'; choose one of: munk\.csv"):
        packaged_profile("c")
    with pytest.raises(
        InputError, match=r"several profiles are named 'a'; choose one of: observed/a\.csv, observed/a\.nc$"
    ):
        packaged_profile("a")


def test_a_folder_beside_an_installed_package_is_not_ours(folder):
    (folder / "pyproject.toml").unlink()
    with pytest.raises(InputError, match="are missing"):
        packaged_profiles()
