"""Whatever goes wrong while results are made: those from before stay as they were, byte for byte."""

from __future__ import annotations

import errno
import os
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from tests.bad_input.sample import Desk


def test_an_interruption_while_weighing(desk: Desk) -> None:
    """A real SIGINT to a real process, once it has begun to fit."""
    program = (
        "import sys, time, discrim.weigh.run as run\n"
        "def begun(*a, **k):\n"
        "    print('begun', file=sys.stderr, flush=True)\n"
        "    time.sleep(60)\n"
        "run.fits_of = begun\n"
        "from discrim.cli import main\n"
        "sys.exit(main(['weigh', 'study.toml']))\n"
    )
    env = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    with subprocess.Popen(
        [sys.executable, "-c", program],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        env=env,
    ) as process:
        assert process.stderr is not None
        assert process.stderr.readline() == "begun\n"
        start = time.monotonic()
        process.send_signal(signal.SIGINT)
        out, err = process.communicate(timeout=30)
    assert time.monotonic() - start < 10
    assert (process.returncode, out) == (130, "")
    assert err == "Interrupted. Results from before stand as they were; nothing was overwritten.\n"
    assert desk.everything() == desk.before


def test_an_interruption_while_folders_are_swapped(
    desk: Desk, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The old folder has been set aside and the new one does not stand yet."""
    rename = Path.rename

    def interrupted(self: Path, target: Path) -> Path:
        if ".new-" in self.name:
            raise KeyboardInterrupt
        return rename(self, target)

    monkeypatch.setattr(Path, "rename", interrupted)
    code, out, err = desk.run("report", "study.toml")
    assert (code, out) == (130, "")
    assert "nothing was overwritten" in err
    assert desk.everything() == desk.before
    assert [p.name for p in (desk.folder / "results").iterdir()] == ["study"]


@pytest.mark.parametrize("full_at", ["report.html", "evidence.json", "runs.csv", "figures"])
def test_a_full_disk(full_at: str, desk: Desk, monkeypatch: pytest.MonkeyPatch) -> None:
    full = OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
    write_text, open_, mkdir = Path.write_text, Path.open, Path.mkdir

    def failing(plain):
        def instead(self: Path, *args, **kwargs):
            if self.name == full_at and ".new-" in str(self):
                raise full
            return plain(self, *args, **kwargs)

        return instead

    monkeypatch.setattr(Path, "write_text", failing(write_text))
    monkeypatch.setattr(Path, "open", failing(open_))
    monkeypatch.setattr(Path, "mkdir", failing(mkdir))
    code, out, err = desk.run("report", "results/study", "--out", "results/study")
    monkeypatch.undo()
    assert (code, out) == (2, "")
    assert "results/study: the results cannot be written: No space left on device\n" in err
    assert "Free some space or choose another folder with --out. Nothing was overwritten." in err
    assert desk.everything() == desk.before
    assert [p.name for p in (desk.folder / "results").iterdir()] == ["study"]


def test_a_folder_of_others(desk: Desk) -> None:
    for content in (
        {"thesis.tex": "years of work"},
        {"evidence.json": '{"other": 1}'},
        {"a/b": ""},
    ):
        theirs = desk.folder / "theirs"
        for name, text in content.items():
            (theirs / name).parent.mkdir(parents=True, exist_ok=True)
            (theirs / name).write_text(text)
        desk.before = desk.everything()
        message = desk.refused("weigh", "study.toml", "--out", "theirs")
        assert "theirs: this folder holds files that discrim did not make" in message
        assert "Choose a new or empty folder with --out." in message
        shutil.rmtree(theirs)
        desk.before = desk.everything()


def test_places_where_no_folder_can_be(desk: Desk) -> None:
    (desk.folder / "file").write_text("x")
    assert "a file stands where the results folder should be" in desk.refused(
        "weigh", "study.toml", "--out", "file"
    )
    assert "a file stands where a folder of the results should be" in desk.refused(
        "weigh", "study.toml", "--out", "file/below/it"
    )
    assert "discrim did not make" in desk.refused("weigh", "study.toml", "--out", ".")
    assert "discrim did not make" in desk.refused("weigh", "study.toml", "--out", "/")
    assert "--out is empty" in desk.refused("weigh", "study.toml", "--out", " ")
    assert (desk.folder / "file").read_text() == "x"


def test_a_folder_that_is_read_only(desk: Desk, monkeypatch: pytest.MonkeyPatch) -> None:
    (desk.folder / "locked").mkdir(mode=0o555)
    # The superuser may write anywhere: say what another user would be told.
    access = os.access

    def as_others_see(path: os.PathLike[str], mode: int) -> bool:
        return access(path, mode) and "locked" not in str(path)

    monkeypatch.setattr(os, "access", as_others_see)
    message = desk.refused("weigh", "study.toml", "--out", "locked/new")
    assert "locked: nothing can be written in this folder" in message
    assert "Choose another folder with --out." in message


def test_own_files_beside_the_results_are_kept(desk: Desk) -> None:
    (desk.folder / "results" / "study" / "notes.txt").write_text("mine")
    code, _, err = desk.run("report", "study.toml", "--quiet")
    assert (code, err) == (0, "")
    assert (desk.folder / "results" / "study" / "notes.txt").read_text() == "mine"
    assert [p.name for p in (desk.folder / "results").iterdir()] == ["study"]


def test_records_name_no_folder_of_this_machine(desk: Desk) -> None:
    """A study named by its whole path gives the same record as one named from beside it."""
    code, beside, err = desk.run("derive", "study.toml", "--json")
    assert (code, err) == (0, "")
    code, whole, err = desk.run("derive", str(desk.folder / "study.toml"), "--json")
    assert (code, err) == (0, "")
    assert '"study.toml, line ' in whole
    assert whole == beside
