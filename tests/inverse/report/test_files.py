import json
import shutil
import stat

import h5py
import numpy as np
import pytest

from finback.errors import InputError
from finback.report import files

EVERYTHING = sorted(files.OURS)


def listing(folder):
    return sorted(str(path.relative_to(folder)) for path in folder.rglob("*") if path.is_file())


def contents(folder):
    return {name: (folder / name).read_bytes() for name in listing(folder)}


@pytest.fixture(scope="module")
def first(tmp_path_factory, pin_estimate):
    """A written result; tests copy it."""
    folder = tmp_path_factory.mktemp("result") / "deep" / "out"
    return files.write(pin_estimate, folder)


@pytest.fixture
def folder(first, tmp_path):
    shutil.copytree(first.estimate.parent, tmp_path / "out")
    return tmp_path / "out"


def test_it_writes_everything_and_says_where(first, pin_estimate, pages, pictures):
    folder = first.estimate.parent
    assert listing(folder) == EVERYTHING
    assert {first.estimate, first.report, first.posterior, *first.figures} == {
        folder / name for name in EVERYTHING
    }
    assert first.report.read_text(encoding="utf-8") == pages["pin"]
    assert (folder / "figures/profile.png").read_bytes() == pictures["pin"][1].png
    text = first.estimate.read_bytes().decode("utf-8")
    assert text.endswith("}\n")
    assert json.loads(text) == json.loads(json.dumps(pin_estimate.to_dict()))
    assert stat.S_IMODE(first.report.stat().st_mode) == 0o666 & ~files._umask()


def test_the_posterior_can_be_read_back(first, pin_estimate):
    with h5py.File(first.posterior) as file:
        for column, name in enumerate(pin_estimate.draws.names):
            np.testing.assert_array_equal(file["posterior"][name][:], pin_estimate.draws.values[..., column])


def test_an_earlier_result_is_refused_and_left_alone(folder, pin_estimate):
    before = contents(folder)
    for refused in (lambda: files.prepare(folder, force=False), lambda: files.write(pin_estimate, folder)):
        with pytest.raises(InputError) as caught:
            refused()
        assert str(caught.value) == (
            f"{folder}: already holds an earlier result (estimate.json); choose another folder, or "
            "overwrite with --force."
        )
    assert contents(folder) == before


@pytest.mark.parametrize("left", ["report.html", "figures/pairs.svg"])
def test_a_part_of_an_earlier_result_counts_as_one(tmp_path, left):
    (tmp_path / left).parent.mkdir(exist_ok=True)
    (tmp_path / left).write_text("old")
    with pytest.raises(InputError, match="already holds an earlier result"):
        files.prepare(tmp_path)


def test_force_replaces_ours_and_leaves_others_alone(folder, rod_estimate):
    (folder / "notes.txt").write_text("keep")
    (folder / "figures" / "photo.png").write_text("keep")
    files.write(rod_estimate, folder, force=True)
    assert "Invented long bar" in (folder / "report.html").read_text(encoding="utf-8")
    assert (folder / "notes.txt").read_text() == (folder / "figures" / "photo.png").read_text() == "keep"
    assert not (
        folder / "figures" / "candidates.png"
    ).exists()  # the old one would be wrong beside this result


def test_a_failure_half_way_changes_nothing(folder, rod_estimate, monkeypatch):
    class Full:
        def to_netcdf(self, place, engine):
            assert engine == "h5netcdf"
            with open(place, "w") as file:
                file.write("half")
            raise OSError(28, "No space left on device")

    monkeypatch.setattr(type(rod_estimate), "to_tree", lambda _self: Full())
    before = contents(folder)
    with pytest.raises(InputError) as caught:
        files.write(rod_estimate, folder, force=True)
    assert str(caught.value) == (
        f"{folder}: cannot be written to (No space left on device); give a folder that can be written."
    )
    assert contents(folder) == before


def test_other_files_in_the_folder_are_no_obstacle(tmp_path):
    (tmp_path / "rig.toml").write_text("")
    files.prepare(tmp_path)
    assert listing(tmp_path) == ["rig.toml"]


def test_what_is_no_folder_or_cannot_be_one_is_refused(tmp_path):
    file = tmp_path / "file"
    file.write_text("mine")
    for place in (file, file / "below", tmp_path / ("x" * 300), tmp_path / "nul\0"):
        with pytest.raises(InputError, match="cannot be written to"):
            files.prepare(place)
    assert file.read_text() == "mine"


def test_a_folder_in_the_place_of_a_file_is_refused_even_with_force(tmp_path):
    (tmp_path / "report.html").mkdir()
    with pytest.raises(InputError, match="is a folder; a result needs that name"):
        files.prepare(tmp_path, force=True)
