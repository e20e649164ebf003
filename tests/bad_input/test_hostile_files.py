"""Files that were made to hurt: each is refused in words, in little time, and nothing is run."""

from __future__ import annotations

import os
import subprocess
import sys
import time

import pytest

from tests.bad_input.sample import STUDY, Desk

STUDIES: dict[str, tuple[bytes, str]] = {
    "picture": (b"\x89PNG\r\n\x1a\n\0\xff", "study.toml, line 1: not UTF-8 text"),
    "UTF-16": (STUDY.encode("utf-16"), "study.toml, line 1: not UTF-8 text"),
    "10 MB line": (b'title = "' + b"x" * 10_000_000 + b'"', "has 10.0 MB, at most 2 MB are read"),
    "2 MB title": (b'title = "' + b"x" * 1_900_000 + b'"', "1,900,000 characters"),
    "2 MB law": (STUDY.replace("k*[A]", "k" + "*[A]" * 450_000).encode(), "the expression has 1,8"),
    "lists in lists": (b"x = " + b"[" * 10_000 + b"]" * 10_000, "nested too deeply"),
    "tables in tables": (b"x = " + b"{a=" * 10_000 + b"1" + b"}" * 10_000, "nested too deeply"),
    "dots in a key": (b"x" + b".a" * 50_000 + b" = 1", "line 1: a key with more than 40 dots"),
    "dots in a table": (b"\n[" + b'"a" . ' * 50_000 + b"a]", "line 2: a key with more than 40"),
    "many tables": (b"[[candidates]]\n" * 120_000, '"table" is missing'),
    "many keys": (b"".join(b"x%d = 1\n" % i for i in range(150_000)), 'unknown key "x0"'),
    "long number": (b"title = " + b"9" * 100_000, "not valid TOML"),
    "brackets": (STUDY.replace("k*[A]", "(" * 9000 + "1" + ")" * 9000).encode(), "too deeply"),
    "signs": (STUDY.replace("k*[A]", "-" * 9000 + "[A]").encode(), "nested too deeply"),
    "functions": (STUDY.replace("k*[A]", "exp(" * 99 + "k" + ")" * 99).encode(), "study.toml, l"),
    "roots": (STUDY.replace("k*[A]", "sqrt(1+" * 39 + "k" + ")" * 39).encode(), "At most 6"),
    "fractions": (STUDY.replace("k*[A]", "k/(1+" * 39 + "K" + ")" * 39).encode(), "At most 6"),
    "powers": (STUDY.replace("k*[A]", "(1+" * 39 + "k" + ")^2" * 39).encode(), "At most 6"),
    "derived in derived": (
        STUDY.replace(
            "[derived]\n",
            '[derived]\nD0 = { formula = "[A]/[B]" }\n'
            + "".join(f'D{i} = {{ formula = "sqrt(1+D{i - 1})" }}\n' for i in range(1, 41)),
        ).encode(),
        "too long or too deep once the others are put into it",
    ),
    "derived doubled": (
        STUDY.replace(
            "[derived]\n",
            '[derived]\nD0 = { formula = "[A]/[B]" }\n'
            + "".join(
                f'D{i} = {{ formula = "D{i - 1}/[A] + D{i - 1}/[B]" }}\n' for i in range(1, 41)
            ),
        ).encode(),
        "too long or too deep once the others are put into it",
    ),
    "tower": (STUDY.replace("k*[A]", "[A]" + "^9" * 5).encode(), "is too large"),
    "products": (
        STUDY.replace("k*[A]", "k*" + "*".join(["9" * 50] * 200)).encode(),
        "study.toml, line 43",
    ),
}


@pytest.mark.parametrize("name", STUDIES)
def test_refused_in_little_time(name: str, desk: Desk) -> None:
    data, says = STUDIES[name]
    desk.write(data)
    start = time.monotonic()
    message = desk.refused()
    assert time.monotonic() - start < 20
    assert message.startswith("study.toml")
    assert says in message


def test_what_is_no_file(desk: Desk) -> None:
    os.mkfifo(desk.folder / "pipe.toml")
    for given in ("pipe.toml", "/dev/zero", "/dev/null"):
        message = desk.refused("weigh", given, "--out", "new")
        assert message == f"{given}: this is no file\nGive a study file (.toml).\n"
    assert "there is no such file" in desk.refused("weigh", "none.toml")
    assert "there is no such file" in desk.refused("weigh", "zero\0byte.toml")
    assert "this is a folder" in desk.refused("weigh", "results", "--out", "new")
    assert "no file" in desk.refused("derive", "/dev/zero")
    assert desk.refused("derive", "nonesuch").startswith('no mechanism is called "nonesuch"')


def test_code_in_a_study_is_not_run(desk: Desk) -> None:
    code = "__import__('os').system('touch pwned')"
    for old in ("B -> P", "k*[A]", "A -> P", "[A]*[B]/([A] + [B])", "rate of P", "umol/L/s", "2 %"):
        desk.write(STUDY.replace(f'"{old}"', f'"{code}"'))
        assert "study.toml, line" in desk.refused()
    done = subprocess.run(
        [sys.executable, "-m", "discrim", "weigh", "study.toml"],
        capture_output=True,
        text=True,
        env={**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)},
    )
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.startswith("study.toml, line 23")
    assert not (desk.folder / "pwned").exists()


# saved evidence that is not what discrim wrote
EVIDENCE = {
    "cut off": ('{"format": 1,', "this is not a file of saved evidence"),
    "a list": ("[1]", 'this is not saved evidence: it has no "format"'),
    "from later": ('{"format": 99}', "this version of discrim reads format 1"),
    "nan": ('{"format": 1, "confidence": NaN}', "it holds NaN"),
    "infinite": ('{"format": 1, "confidence": -Infinity}', "it holds -Infinity"),
    "deep": ("[" * 100_000, "this is not a file of saved evidence"),
}


@pytest.mark.parametrize("name", EVIDENCE)
def test_evidence_that_is_none(name: str, desk: Desk) -> None:
    text, says = EVIDENCE[name]
    (desk.folder / "other").mkdir()
    (desk.folder / "other" / "evidence.json").write_text(text)
    desk.before = desk.everything()
    message = desk.refused("report", "other")
    assert message.startswith("other/evidence.json: ")
    assert says in message
    assert "discrim weigh" in message


def test_evidence_of_the_wrong_kinds_is_drawn_as_far_as_it_goes(desk: Desk) -> None:
    (desk.folder / "other").mkdir()
    odd = '{"format": 1, "title": ["x"], "candidates": 3, "questions": {"a": 1}, "runs": []}'
    (desk.folder / "other" / "evidence.json").write_text(odd)
    code, _, err = desk.run("report", "other")
    assert (code, err) == (0, "")
