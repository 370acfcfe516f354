"""Studies that mean harm: nothing of theirs is run, nothing is written outside the results, and neither terminal nor report is steered."""

import os
import re
import subprocess
import sys
import unicodedata
from pathlib import Path

import pytest

from sweep.cli.main import main
from tests.faults import driver
from tests.texts import SMALL

QUICK = SMALL.replace("levels = 20", "levels = 3").replace("levels = 30", "levels = 3")
TITLE = r"\u001b[2J\u001b]0;owned\u0007 <script>alert(1)</script> \u009b31m \u202egnp.exe\u2066 \u2028 {{ 7*7 }} ../../x\nno faults, 0 warnings"
SOURCE = r"<img src=x onerror=alert(1)> \u001b[31m\u202e"


@pytest.fixture
def here(tmp_path, monkeypatch):
    """Return a folder to work in, deep enough for `../../x` to be seen."""
    folder = tmp_path / "a" / "b"
    folder.mkdir(parents=True)
    monkeypatch.chdir(folder)
    return folder


def _files(root):
    return {str(path.relative_to(root)) for path in root.rglob("*")}


def _harmless(text, keep="\n"):
    """Return the signs of a text that steer a terminal or turn the direction of reading."""
    return [sign for sign in text if sign not in keep and unicodedata.category(sign) in ("Cc", "Cf", "Cs", "Zl", "Zp")]


@pytest.mark.parametrize("command", ["check", "batch", "run"])
def test_title_and_source_steer_neither_terminal_nor_report(here, tmp_path, capsys, command):
    text = QUICK.replace('title = "Small <b>study</b>"', f'title = "{TITLE}"').replace('source = "invented"', f'source = "{SOURCE}"')
    (here / "study.toml").write_text(text)
    assert 0 == main([command, "study.toml"])
    found = capsys.readouterr()
    assert [] == _harmless(found.out) == _harmless(found.err)
    title = found.out.splitlines()[0]
    assert "<script>alert(1)</script>" in title
    assert title.endswith("no faults, 0 warnings"), "a title is one line"
    outside = {name for name in _files(tmp_path) if not name.startswith(("a/b/results/", "a/b/study.toml"))}
    assert {"a", "a/b", *(["a/b/results"] if command != "check" else [])} == outside
    if command == "run":
        page = (here / "results" / "study" / "report.html").read_text()
        assert [] == _harmless(page, "\n\t\u2028")
        assert not re.search(r"<script|<img[^>]*onerror", page)
        assert "&lt;script&gt;alert(1)&lt;/script&gt;" in page
        assert "{{ 7*7 }}" in page
        for figure in (here / "results" / "study" / "figures").glob("*.svg"):
            assert not re.search(r"<script|onerror", figure.read_text())


NAMES = ["../../x", "/tmp/x", "a b", "x\u001b[31m", "<script>alert(1)</script>", "\u202ex", "x\n[study]", "$(touch x)", "CON\u0000",
         "__class__.__x__", "", "é\u0301"]  # fmt: skip


@pytest.mark.parametrize("name", NAMES)
@pytest.mark.parametrize("old", ["[species.S]", "[reactions.bad]", "dose =", "[limits]\n", "[vessel]\n", "[study]\n"])
def test_names_that_are_no_names_are_refused_in_words(here, tmp_path, capsys, name, old):
    quoted = '"' + "".join(c if c.isalnum() or c in "./ <>()$[]_" else f"\\u{ord(c):04x}" for c in name) + '"'
    new = {"dose =": f"{quoted} =", "[limits]\n": f'[limits]\n{quoted} = {{ at_most = "1 K" }}\n'}.get(old)
    new = new or (f"{old}{quoted} = 1\n" if old.endswith("\n") else f"{old.partition('.')[0]}.{quoted}]")
    (here / "study.toml").write_text(QUICK.replace(old, new, 1))
    before = _files(tmp_path)
    assert 2 == main(["run", "study.toml"])
    found = capsys.readouterr()
    assert "" == found.out
    assert [] == _harmless(found.err)
    assert re.search(r"\d faults?\n$", found.err)
    assert all(line.startswith(("study.toml:", "  found", "  expected", "  because")) for line in found.err.splitlines()[:-1] if line), found.err
    assert before == _files(tmp_path)


@pytest.mark.parametrize("file", ["...toml", "....toml", "-x.toml", "a b;c.toml", "<b>.toml", "\u202ex.toml", "x\ny.toml"])
def test_names_of_files_lead_nowhere_else(here, tmp_path, capsys, file):
    (here / file).write_text(QUICK)
    assert 0 == main(["batch", f"./{file}", "--no-figures"])
    found = capsys.readouterr()
    assert [] == _harmless(found.out)
    outside = {name for name in _files(tmp_path) if not name.startswith(("a/b/results/", f"a/b/{file}"))}
    assert {"a", "a/b", "a/b/results"} == outside


@pytest.mark.parametrize("file", ["/dev/zero", "pipe", "folder", r"x\u0000y", "../../none.csv", r"\u001b[31m.csv"])
def test_lists_that_are_no_files(here, capsys, file):
    os.mkfifo(here / "pipe")
    (here / "folder").mkdir()
    (here / "study.toml").write_text(QUICK[: QUICK.index("[window]")] + f'[plan]\nkind = "list"\nfile = "{file}"\n')
    assert 2 == main(["run", "study.toml"])
    found = capsys.readouterr()
    assert re.match(r"plan\.file: .* (is no file|cannot be read: .*)\n$", found.err)
    assert [] == _harmless(found.err)
    assert not (here / "results").exists()


def test_list_with_harmful_cells(here, capsys):
    (here / "points.csv").write_text('dose [mol/L],"start [\x1b[31m]","\u202e"\n=cmd|x,\x1b[2J,"a\nb"\n')
    (here / "study.toml").write_text(QUICK[: QUICK.index("[window]")] + '[plan]\nkind = "list"\nfile = "points.csv"\n')
    assert 2 == main(["check", "study.toml"])
    assert [] == _harmless(capsys.readouterr().err)


def test_study_that_never_ends(capsys):
    assert 2 == main(["check", "/dev/zero"])
    assert "at most 4000000" in capsys.readouterr().err


def test_more_points_than_can_be_planned(here, capsys):
    (here / "study.toml").write_text(SMALL.replace("levels = 20", "levels = 100000").replace("levels = 30", "levels = 100000"))
    for command in ("check", "run"):
        assert 2 == main([command, "study.toml"])
        assert "10,000,000,000 points" in capsys.readouterr().err


def _guided(seconds, seed):
    command = [sys.executable, "-m", "tests.study.guided", str(seconds), str(seed)]
    found = subprocess.run(command, capture_output=True, text=True, check=False, timeout=seconds + 300.0, env=driver.environment(), cwd=driver.ROOT)
    assert 0 == found.returncode, found.stderr[-5000:]
    return [int(word) for word in found.stdout.split()]


def test_guided_fuzzing_finds_nothing():
    count, kept, seen = _guided(5, 7)
    assert count > 10
    assert kept > 3, "nothing that was changed led anywhere new"
    assert seen > 500


@pytest.mark.long
@pytest.mark.parametrize("seed", [1, 2])
def test_guided_fuzzing_finds_nothing_in_two_minutes(seed):
    _, kept, _ = _guided(120, seed)
    assert kept > 30


@pytest.mark.parametrize("code", ["eval('1')", "open('x', 'w')", "__import__('os').system('true')", "__import__('subprocess').run(['true'])"])
def test_fuzzer_sees_what_is_forbidden(code, tmp_path):
    program = f"from tests.study.guided import forbid\nimport os, subprocess\ncode = compile({code!r}, '', 'eval')\nforbid()\neval(code)"
    found = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=False, env=driver.environment(), cwd=tmp_path)
    assert "Forbidden" in found.stderr
    assert [] == list(tmp_path.iterdir())


def test_numbers_of_a_study_are_read_by_no_interpreter():
    """Text of a study is never handed to Python."""
    for part in ("study", "base", "plan"):
        for path in Path("sweep", part).rglob("*.py"):
            assert not re.search(r"(?<![\w.])(eval|exec|compile)\(", path.read_text()), path
