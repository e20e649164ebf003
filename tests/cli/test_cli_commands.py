"""The command line: exit codes, where output goes, what is said about a slip of the fingers.

The stages behind the commands are replaced by stand-ins here; they have their own tests.
"""

import io
import json
import subprocess
import sys
import types

import pytest

import discrim
from discrim import cli
from discrim.errors import DiscrimError, Place

DOCUMENT = {
    "format": 1,
    "title": "Invented",
    "candidates": [{"name": "one", "law": "r = k*[A]", "status": "converged", "outcome": "stands"}],
    "questions": [
        {"asks": "participates", "about": "B", "verdict": "undecided", "sentence": "Who knows.",
         "why": ["one ratio only"]}
    ],
}  # fmt: skip


@pytest.fixture
def stages(monkeypatch):
    """Stand-ins for loading and weighing; what they were called with is in ``calls``."""
    calls = []
    weigh = types.ModuleType("discrim.weigh")
    study = types.ModuleType("discrim.study")

    def load(path):
        calls.append(("load", path))
        if "missing" in str(path):
            raise DiscrimError("there is no such file", place=Place(file=str(path)), do="Look.")
        return "a study"

    def run(study, *, seed, workers, progress):
        calls.append(("weigh", study, seed, workers))
        progress("fitting", 1, 2)
        return weigh.document

    weigh.document = DOCUMENT
    weigh.weigh = run
    weigh.check = lambda study: {"title": "Invented", "cannot_decide": ["Whether B takes part."]}
    weigh.derive_all = lambda study: [{"name": "one", "law": "r = k*[A]"}]
    weigh.derive_mechanism = lambda path: {"name": "mechanism", "law": "r = k*[A]*[B]"}
    study.load = load
    monkeypatch.setitem(sys.modules, "discrim.weigh", weigh)
    monkeypatch.setitem(sys.modules, "discrim.study", study)
    weigh.calls = calls
    return weigh


def test_weigh_prints_the_verdict_and_writes_the_results(stages, tmp_path, capsys, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert cli.main(["weigh", "amines.toml"]) == 0
    out, err = capsys.readouterr()
    lines = out.splitlines()
    assert lines[3] == "Does B take part?" + "UNDECIDED".rjust(63)
    assert lines[-1] == "Report: results/amines/report.html"
    assert (tmp_path / "results" / "amines" / "report.html").is_file()
    assert err == ""
    assert stages.calls == [("load", "amines.toml"), ("weigh", "a study", 1, 1)]


def test_options_reach_the_job(stages, tmp_path):
    code = cli.main(["weigh", "s.toml", "--out", str(tmp_path / "o"), "--seed", "7",
                     "--workers", "2", "--quiet"])  # fmt: skip
    assert code == 0
    assert stages.calls[-1] == ("weigh", "a study", 7, 2)
    assert (tmp_path / "o" / "evidence.json").is_file()


def test_json_is_the_document_and_nothing_else(stages, tmp_path, capsys):
    assert cli.main(["weigh", "s.toml", "--json", "--out", str(tmp_path / "o")]) == 0
    assert json.loads(capsys.readouterr().out) == DOCUMENT


def test_quiet_is_the_verdicts(stages, tmp_path, capsys):
    cli.main(["weigh", "s.toml", "--quiet", "--out", str(tmp_path / "o")])
    assert capsys.readouterr().out == "Does B take part?" + "undecided".rjust(63) + "\n"


def test_something_that_could_not_be_computed_is_exit_1(stages, tmp_path, capsys):
    failed = {"name": "two", "status": "not finite at every start"}
    stages.document = DOCUMENT | {"candidates": [failed]}
    assert cli.main(["weigh", "s.toml", "--out", str(tmp_path / "o")]) == 1
    assert "“two” could not be fitted: not finite at every start." in capsys.readouterr().out


def test_wrong_input_is_exit_2_on_standard_error(stages, capsys):
    assert cli.main(["weigh", "missing.toml"]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    assert err == "missing.toml: there is no such file\nLook.\n"


def test_a_folder_of_others_is_refused_before_the_work(stages, tmp_path, capsys):
    (tmp_path / "thesis.tex").write_text("years of work")
    assert cli.main(["weigh", "s.toml", "--out", str(tmp_path)]) == 2
    assert "is left alone" in capsys.readouterr().err
    assert ("weigh", "a study", 1, 1) not in stages.calls


def test_interrupted_is_exit_130(stages, tmp_path, capsys):
    def interrupted(*_, **__):
        raise KeyboardInterrupt

    cli.main(["weigh", "s.toml", "--quiet", "--out", str(tmp_path / "o")])
    before = (tmp_path / "o" / "evidence.json").read_bytes()
    stages.weigh = interrupted
    capsys.readouterr()
    assert cli.main(["weigh", "s.toml", "--out", str(tmp_path / "o")]) == 130
    assert "nothing was overwritten" in capsys.readouterr().err
    assert (tmp_path / "o" / "evidence.json").read_bytes() == before


def test_report_draws_again_without_fitting(stages, tmp_path, capsys, monkeypatch):
    monkeypatch.chdir(tmp_path)
    cli.main(["weigh", "s.toml"])
    first = capsys.readouterr().out
    (tmp_path / "results" / "s" / "report.html").unlink()
    stages.calls.clear()
    for given in ("s.toml", "results/s", "results/s/evidence.json"):
        assert cli.main(["report", given]) == 0
        assert capsys.readouterr().out == first
    assert stages.calls == []
    assert (tmp_path / "results" / "s" / "report.html").is_file()


def test_report_without_evidence_says_what_to_do(tmp_path, capsys, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert cli.main(["report", "s.toml"]) == 2
    err = capsys.readouterr().err
    assert "there is no saved evidence here" in err
    assert "Run `discrim weigh` on the study to make it." in err


def test_check_and_derive(stages, tmp_path, capsys):
    assert cli.main(["check", "s.toml"]) == 0
    assert "These runs cannot decide\n  - Whether B takes part." in capsys.readouterr().out
    assert cli.main(["derive", "s.toml"]) == 0
    assert "r = k*[A]" in capsys.readouterr().out
    mechanism = tmp_path / "m.toml"
    mechanism.write_text('title = "x"\n[steps]\na = "A + B -> P"\n')
    assert cli.main(["derive", str(mechanism), "--quiet"]) == 0
    assert capsys.readouterr().out == "mechanism: r = k*[A]*[B]\n"
    assert cli.main(["derive", "two-parallel-pathways", "--quiet"]) == 0
    assert capsys.readouterr().out == "mechanism: r = k*[A]*[B]\n"
    assert cli.main(["derive", "s.toml", "--json"]) == 0
    assert json.loads(capsys.readouterr().out) == [{"name": "one", "law": "r = k*[A]"}]


@pytest.mark.parametrize(
    ("arguments", "expected"),
    [
        (["weig", "s"], 'discrim: there is no command "weig". Did you mean "weigh"?\n'
                        "See `discrim --help`.\n"),
        (["xyz"], 'discrim: there is no command "xyz". Commands: derive, check, weigh, report.\n'
                  "See `discrim --help`.\n"),
        (["weigh", "s", "--sed", "3"], "discrim weigh: there is no option --sed. "
                                       'Did you mean "--seed"?\nSee `discrim weigh --help`.\n'),
        (["weigh", "a", "b"], "discrim weigh: one study at a time; b is one too many\n"
                              "See `discrim weigh --help`.\n"),
        (["weigh", "s", "--workers", "0"], "discrim weigh: argument --workers: '0' is not a whole "
                                           "number from 1 up\nSee `discrim weigh --help`.\n"),
        (["weigh"], "discrim weigh: the following arguments are required: STUDY\n"
                    "See `discrim weigh --help`.\n"),
    ],
)  # fmt: skip
def test_a_slip_of_the_fingers(arguments, expected, capsys):
    assert cli.main(arguments) == 2
    out, err = capsys.readouterr()
    assert (out, err) == ("", expected)


def test_no_command_shows_the_help(capsys):
    assert cli.main([]) == 2
    out, err = capsys.readouterr()
    assert out == ""
    for command in ("derive", "check", "weigh", "report"):
        assert f"\n  {command} " in err


def test_a_reader_that_leaves_early_is_no_error(stages, tmp_path, monkeypatch):
    class Closed(io.StringIO):
        def write(self, text):
            raise BrokenPipeError

        def fileno(self):
            return fake.fileno()

    with (tmp_path / "fd").open("w") as fake:
        monkeypatch.setattr(sys, "stdout", Closed())
        assert cli.main(["check", "s.toml"]) == 0


def test_progress_is_for_terminals(capsys, monkeypatch):
    from discrim.cli.output import Progress

    class Terminal(io.StringIO):
        def isatty(self):
            return True

    Progress()("fitting", 1, 2)
    assert capsys.readouterr().err == ""
    monkeypatch.setattr(sys, "stderr", Terminal())
    quiet = Progress(quiet=True)
    quiet("fitting", 1, 2)
    assert sys.stderr.getvalue() == ""
    loud = Progress()
    loud("fitting\x1b", 1, 2)
    loud.close()
    assert sys.stderr.getvalue() == "\r1/2 fitting \r            \r"


HEAVY = ("numpy", "scipy", "sympy", "pandas", "matplotlib", "statsmodels", "pint", "jinja2", "rich")


@pytest.mark.parametrize(
    "code",
    [
        "import discrim",
        "import discrim.cli, sys; discrim.cli.main(['--version'])",
        "import discrim.cli, sys; discrim.cli.main(['--help'])",
        "import discrim.cli, sys; discrim.cli.main(['weigh', '--help'])",
        "import discrim.cli, sys; discrim.cli.main(['weig'])",
    ],
)
def test_no_numerical_library_before_there_is_work(code):
    code += f"\nimport sys; print('heavy:', [m for m in {HEAVY!r} if m in sys.modules])"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "heavy: []"


def test_version_and_public_names():
    done = subprocess.run(
        [sys.executable, "-m", "discrim", "--version"], capture_output=True, text=True, check=True
    )
    assert done.stdout == f"discrim {discrim.__version__}\n"
    assert discrim.__all__ == [
        "DiscrimError",
        "Mechanism",
        "Place",
        "RateLaw",
        "Study",
        "__version__",
        "derive",
        "load",
        "load_mechanism",
        "summary",
        "write_report",
    ]
    assert dir(discrim) == discrim.__all__
    with pytest.raises(AttributeError, match="module 'discrim' has no attribute 'wiegh'"):
        discrim.wiegh  # noqa: B018
