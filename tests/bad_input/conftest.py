"""A desk with results from before, on which commands go wrong."""

import shutil

import pytest

from discrim import cli
from tests.bad_input.sample import STUDY, TABLE, Desk


@pytest.fixture(scope="session")
def old_results(tmp_path_factory):
    """Results of the study as it should be."""
    folder = tmp_path_factory.mktemp("before")
    (folder / "study.toml").write_text(STUDY)
    (folder / "runs.csv").write_text(TABLE)
    assert cli.main(["weigh", str(folder / "study.toml"), "--quiet"]) == 0
    return folder / "results"


@pytest.fixture
def desk(tmp_path, capsys, monkeypatch, old_results):
    monkeypatch.chdir(tmp_path)
    shutil.copytree(old_results, tmp_path / "results")
    here = Desk(tmp_path, capsys)
    here.write()
    here.before = here.everything()
    assert "results/study/evidence.json" in here.before
    capsys.readouterr()
    return here
