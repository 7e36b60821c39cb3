"""Shell completion: the scripts are tried in the shells themselves."""

import shutil
import subprocess

import pytest

from yieldsim.cli import main
from yieldsim.commands import COMMANDS, completion


def bash(folder, *words):
    """Return what bash offers for the last of the words."""
    script = completion.bash(completion.described())
    listed = " ".join(f"'{word}'" for word in words)
    script += (
        f"\nCOMP_WORDS=(yieldsim {listed}); COMP_CWORD={len(words)}; _yieldsim; printf '%s\\n' \"${{COMPREPLY[@]}}\"\n"
    )
    done = subprocess.run(["bash", "-c", script], cwd=folder, capture_output=True, text=True, timeout=30, check=False)
    assert done.returncode == 0
    assert done.stderr == ""
    return sorted(done.stdout.split("\n")[:-1])


@pytest.fixture
def folder(tmp_path):
    for name in ("mine.yaml", "two words.yml", "notes.txt"):
        (tmp_path / name).touch()
    (tmp_path / "results").mkdir()
    return tmp_path


needs_bash = pytest.mark.skipif(shutil.which("bash") is None, reason="bash is not installed")


@needs_bash
@pytest.mark.parametrize(
    ("words", "offered"),
    [
        ([""], sorted([*COMMANDS, "--help", "--version"])),
        (["r"], ["run"]),
        (["run", ""], ["mine.yaml", "results", "two words.yml"]),
        (["run", "two"], ["two words.yml"]),
        (["run", "--o"], ["--out"]),
        (["run", "--out", ""], ["results"]),
        (["run", "--workers", ""], [""]),
        (["completion", "z"], ["zsh"]),
        (["schema", ""], [""]),
    ],
)
def test_bash_offers(folder, words, offered):
    assert bash(folder, *words) == offered


@pytest.mark.parametrize("shell", completion.SHELLS)
def test_the_script_is_sound_for_its_shell(shell, tmp_path, capsys):
    if shutil.which(shell) is None:
        pytest.skip(f"{shell} is not installed")
    assert main(["completion", shell]) == 0
    file = tmp_path / "script"
    file.write_text(capsys.readouterr().out, encoding="utf-8")
    done = subprocess.run([shell, "-n", str(file)], capture_output=True, text=True, timeout=30, check=False)
    assert (done.returncode, done.stderr) == (0, "")


@pytest.mark.parametrize("shell", completion.SHELLS)
def test_every_command_and_option_is_in_every_script(shell):
    commands = completion.described()
    text = getattr(completion, shell)(commands)
    for command in commands:
        assert command.name in text
        for option in command.options:
            assert (f"-l {option.flag[2:]}" if shell == "fish" else option.flag) in text


def test_what_follows_an_option_is_known():
    run = next(command for command in completion.described() if command.name == "run")
    kinds = {option.flag: option.value for option in run.options}
    assert kinds["--out"] == "folder"
    assert kinds["--workers"] == "nothing"
    assert kinds["--fresh"] == ""
    assert run.operand == "study"


def test_an_unknown_shell_is_refused(capsys):
    assert main(["completion", "tcsh"]) == 1
    assert "bash" in capsys.readouterr().err
