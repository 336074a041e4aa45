import pytest

from rupture.errors import InputError
from rupture.folder import output_folder


def test_files_appear_only_when_the_run_is_whole(tmp_path):
    target = tmp_path / "run"
    with pytest.raises(RuntimeError), output_folder(target) as scratch:
        (scratch / "result.nc").write_text("half")
        raise RuntimeError
    assert not target.exists()
    with output_folder(target) as scratch:
        (scratch / "figures").mkdir()
        (scratch / "figures" / "a.png").write_text("a")
        (scratch / "result.nc").write_text("whole")
        assert not (target / "result.nc").exists()
    assert sorted(p.relative_to(target).as_posix() for p in target.rglob("*")) == [
        "figures",
        "figures/a.png",
        "result.nc",
    ]


def test_a_failed_rerun_leaves_the_earlier_run_alone(tmp_path):
    (tmp_path / "result.nc").write_text("earlier")
    (tmp_path / "notes.txt").write_text("the user's own")
    with pytest.raises(RuntimeError), output_folder(tmp_path, overwrite=True) as scratch:
        (scratch / "result.nc").write_text("half")
        raise RuntimeError
    assert (tmp_path / "result.nc").read_text() == "earlier"
    assert sorted(p.name for p in tmp_path.iterdir()) == ["notes.txt", "result.nc"]


def test_an_earlier_run_is_not_replaced_unasked(tmp_path):
    (tmp_path / "result.nc").write_text("earlier")
    with pytest.raises(InputError, match="--overwrite"), output_folder(tmp_path):
        pass


def test_two_runs_into_one_folder(tmp_path):
    with (
        output_folder(tmp_path / "run"),
        pytest.raises(InputError, match="another run is writing"),
        output_folder(tmp_path / "run"),
    ):
        pass


def test_a_file_is_not_a_folder(tmp_path):
    (tmp_path / "run").write_text("")
    with pytest.raises(InputError, match="is not a folder"), output_folder(tmp_path / "run"):
        pass
