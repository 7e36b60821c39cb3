"""The command line: help without the numeric stack, one policy for exit codes, messages where they belong."""

import os
import re
import subprocess
import sys
import types
from pathlib import Path

import pytest

from yieldsim import cli
from yieldsim.commands import COMMANDS
from yieldsim.errors import InputError, PlaceError, Problem

HEAVY = ("numpy", "pandas", "xarray", "scipy", "matplotlib", "pydantic", "ruamel", "pvlib", "numba")


def python(*words, **options):
    """Run this Python in a process of its own."""
    return subprocess.run([sys.executable, *words], capture_output=True, text=True, timeout=120, check=False, **options)


@pytest.fixture
def command(monkeypatch):
    """Return what makes `yieldsim schema` do something else."""

    def set_it(run):
        module = types.ModuleType("yieldsim.commands.schema")
        module.EXAMPLE, module.arguments, module.run = "example", lambda parser: None, run
        monkeypatch.setitem(sys.modules, "yieldsim.commands.schema", module)

    return set_it


# --------------------------------------------------------------------------------------------------------- help


@pytest.mark.parametrize("words", [["--help"], ["--version"], *([name, "--help"] for name in COMMANDS)])
def test_help_answers_without_the_numeric_stack(words):
    code = (
        "import sys\n"
        "from yieldsim.cli import main\n"
        f"try: main({words!r})\n"
        "except SystemExit as end: assert end.code == 0, end.code\n"
        f"print([name for name in {HEAVY!r} if name in sys.modules], file=sys.stderr)\n"
    )
    done = python("-c", code)
    assert done.returncode == 0, done.stderr
    assert done.stderr.strip() == "[]"
    assert done.stdout


@pytest.mark.parametrize("name", COMMANDS)
def test_every_command_shows_a_worked_example(name, capsys):
    with pytest.raises(SystemExit) as end:
        cli.main([name, "--help"])
    assert end.value.code == 0
    text = capsys.readouterr().out
    assert f"\n  yieldsim {name}" in text.split("example:")[1]


def test_the_module_runs_as_a_program():
    done = python("-m", "yieldsim", "--version")
    assert re.fullmatch(r"yieldsim \d+\.\d+\.\d+\n", done.stdout)
    assert done.returncode == cli.DONE


def test_nothing_chosen_shows_help_and_is_wrong(capsys):
    assert cli.main([]) == cli.WRONG_INPUT
    said = capsys.readouterr()
    assert "usage: yieldsim" in said.err
    assert said.out == ""


# -------------------------------------------------------------------------------------------------- exit codes


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (["rnu"], "did you mean `run`?"),
        (["run"], "STUDY.yaml"),
        (["run", "x.yaml", "--nonsense"], "--nonsense"),
        (["run", "x.yaml", "--workers", "0"], "a whole number from 1"),
        (["run", "x.yaml", "--work", "2"], "--work"),  # no abbreviations: they break scripts when options are added
        (["check", "no such file.yaml"], "no such file.yaml: found no such file"),
    ],
)
def test_a_wrong_command_line_or_study_is_1(words, said, capsys, monkeypatch, tmp_path):
    monkeypatch.chdir(tmp_path)
    assert cli.main(words) == cli.WRONG_INPUT
    err = capsys.readouterr().err
    assert said in err
    assert err.startswith("error: ")
    assert "Traceback" not in err


@pytest.mark.parametrize(
    ("error", "code", "said"),
    [
        (InputError([Problem("a.yaml", 3, "x", "1", "2"), Problem("b.csv", 0, "", "3", "4")]), 1, "error: a.yaml:3: x"),
        (PlaceError("the folder is in use"), 2, "error: the folder is in use"),
        (PermissionError(13, "Permission denied", "out"), 2, "Permission denied: 'out'"),
        (OSError(28, "No space left on device"), 2, "No space left on device"),
        (MemoryError(), 2, "not enough memory"),
        (KeyboardInterrupt(), 130, "interrupted"),
    ],
)
def test_one_policy_for_what_goes_wrong(command, error, code, said, capsys):
    def run(options):
        raise error

    command(run)
    assert cli.main(["schema"]) == code
    err = capsys.readouterr().err
    assert said in err
    assert "Traceback" not in err


def test_every_problem_has_a_line_of_its_own(command, capsys):
    def run(options):
        raise InputError([Problem("a.yaml", i, "", "x", "y") for i in range(1, 4)])

    command(run)
    cli.main(["schema"])
    assert [line.split(":")[2] for line in capsys.readouterr().err.splitlines()] == ["1", "2", "3"]


def test_thousands_of_problems_do_not_flood_the_terminal(command, capsys):
    def run(options):
        raise InputError([Problem("a", i, "", "x", "y") for i in range(5000)])

    command(run)
    cli.main(["schema"])
    lines = capsys.readouterr().err.splitlines()
    assert len(lines) < 250
    assert "4800 problems more" in lines[-1]


def test_a_bug_is_3_and_leaves_a_log(command, capsys, monkeypatch, tmp_path):
    def run(options):
        raise ZeroDivisionError("secret of the bug")

    monkeypatch.setattr("tempfile.tempdir", str(tmp_path))
    command(run)
    assert cli.main(["schema"]) == cli.BUG
    err = capsys.readouterr().err
    (log,) = tmp_path.iterdir()
    assert str(log) in err
    assert len(err.splitlines()) == 1
    text = log.read_text(encoding="utf-8")
    for part in ("ZeroDivisionError: secret of the bug", "Traceback", "yieldsim ", "numpy ", "['schema']"):
        assert part in text


def test_a_bug_where_no_log_can_be_written_shows_it(command, capsys, monkeypatch, tmp_path):
    def run(options):
        raise ZeroDivisionError("secret of the bug")

    monkeypatch.setattr("tempfile.tempdir", str(tmp_path / "gone"))
    command(run)
    assert cli.main(["schema"]) == cli.BUG
    assert "secret of the bug" in capsys.readouterr().err


def test_a_reader_that_goes_away_is_no_bug():
    with subprocess.Popen(
        [sys.executable, "-c", "import sys; from yieldsim.cli import main; sys.exit(main(['schema']))"],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
    ) as process:
        process.stdout.close()
        said = process.stderr.read()
        process.wait(timeout=60)
    assert said == b""
    assert process.returncode == cli.NOT_HERE


def test_a_closed_stderr_does_not_hide_the_exit_code(command, monkeypatch):
    def run(options):
        raise PlaceError("x")

    command(run)
    with Path(os.devnull).open() as unwritable:
        monkeypatch.setattr(sys, "stderr", unwritable)
        assert cli.main(["schema"]) == cli.NOT_HERE
