"""``yieldsim completion``: what a shell needs to complete commands, options and study files."""

from __future__ import annotations

import argparse
from dataclasses import dataclass

EXAMPLE = """example:
  yieldsim completion bash >> ~/.bash_completion
  yieldsim completion zsh > ~/.zfunc/_yieldsim          with fpath+=~/.zfunc before compinit in ~/.zshrc
  yieldsim completion fish > ~/.config/fish/completions/yieldsim.fish
"""

SHELLS = ("bash", "zsh", "fish")
_NOTHING, _FOLDER, _STUDY, _FILE = "nothing", "folder", "study", "file"


@dataclass(frozen=True, slots=True)
class Option:
    """One option of a command.

    Parameters
    ----------
    flag : str, its long form
    about : str, its help
    value : what follows it: ``""`` no value, ``nothing`` a value that cannot be guessed, ``folder study file``
    """

    flag: str
    about: str
    value: str


@dataclass(frozen=True, slots=True)
class Command:
    """One command: its summary, its options, its words, and what its operand is."""

    name: str
    about: str
    options: tuple[Option, ...]
    words: tuple[str, ...]
    operand: str


def arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the options of the command."""
    parser.add_argument("shell", choices=SHELLS, help="the shell to write for")


def run(options: argparse.Namespace) -> int:
    """Print the script of a shell."""
    write = {"bash": bash, "zsh": zsh, "fish": fish}[options.shell]
    print(write(described()), end="")
    return 0


def described() -> tuple[Command, ...]:
    """Return all commands as their parsers have them."""
    from yieldsim.commands import COMMANDS
    from yieldsim.commands._parser import parsers

    _, commands = parsers(COMMANDS)
    return tuple(_command(name, COMMANDS[name], parser) for name, parser in commands.items())


def _command(name: str, about: str, parser: argparse.ArgumentParser) -> Command:
    options: list[Option] = []
    words: list[str] = []
    operand = _NOTHING
    for action in parser._actions:
        if action.option_strings:
            value = "" if action.nargs == 0 else _kind(action)
            options.append(Option(action.option_strings[-1], action.help or "", value))
        elif action.choices:
            words.extend(str(choice) for choice in action.choices)
        else:
            operand = _kind(action)
    return Command(name, about, tuple(options), tuple(words), operand)


def _kind(action: argparse.Action) -> str:
    """Return what a value is, by the word that stands for it in the help."""
    shown = str(action.metavar or "")
    if shown.endswith(".yaml"):
        return _STUDY
    if shown == "DIR":
        return _FOLDER
    return _FILE if "." in shown else _NOTHING


# -------------------------------------------------------------------------------------------------------- bash

_BASH_VALUE = {
    _NOTHING: "COMPREPLY=()",
    _FOLDER: 'mapfile -t COMPREPLY < <(compgen -d -- "$current")',
    _STUDY: (
        'mapfile -t COMPREPLY < <(compgen -d -- "$current"; '
        'compgen -f -X "!*.yaml" -- "$current"; compgen -f -X "!*.yml" -- "$current")'
    ),
    _FILE: 'mapfile -t COMPREPLY < <(compgen -f -- "$current")',
}
_BASH = """\
# yieldsim completion for bash
_yieldsim() {{
  local current=${{COMP_WORDS[COMP_CWORD]}} previous=${{COMP_WORDS[COMP_CWORD-1]}} command=${{COMP_WORDS[1]}}
  if [ "$COMP_CWORD" -eq 1 ]; then
    mapfile -t COMPREPLY < <(compgen -W "{names} --help --version" -- "$current")
    return
  fi
  case "$command $previous" in
{values}
  esac
  case "$command" in
{commands}
  esac
}}
complete -o filenames -F _yieldsim yieldsim
"""
_BASH_COMMAND = """\
    {name})
      case "$current" in
        -*) mapfile -t COMPREPLY < <(compgen -W "{flags}" -- "$current") ;;
        *) {operand} ;;
      esac ;;"""


def bash(commands: tuple[Command, ...]) -> str:
    """Return the completion script of bash 4 or later."""
    values = [
        f'    "{command.name} {option.flag}") {_BASH_VALUE[option.value]}; return ;;'
        for command in commands
        for option in command.options
        if option.value
    ]
    bodies = []
    for command in commands:
        operand = _BASH_VALUE[command.operand]
        if command.words:
            operand = f'mapfile -t COMPREPLY < <(compgen -W "{" ".join(command.words)}" -- "$current")'
        flags = " ".join(option.flag for option in command.options)
        bodies.append(_BASH_COMMAND.format(name=command.name, flags=flags, operand=operand))
    names = " ".join(command.name for command in commands)
    return _BASH.format(names=names, values="\n".join(values), commands="\n".join(bodies))


# --------------------------------------------------------------------------------------------------------- zsh

_ZSH_VALUE = {_NOTHING: " ", _FOLDER: "_files -/", _STUDY: '_files -g "*.y(a|)ml"', _FILE: "_files"}
_ZSH = """\
#compdef yieldsim
# yieldsim completion for zsh
_yieldsim() {{
  local -a commands
  commands=(
{names}
  )
  if (( CURRENT == 2 )); then
    _describe command commands
    _arguments '--help[show help]' '--version[show the version]'
    return
  fi
  local command=$words[2]
  shift words
  (( CURRENT-- ))
  case $command in
{cases}
  esac
}}
if [ "$funcstack[1]" = "_yieldsim" ]; then _yieldsim "$@"; else compdef _yieldsim yieldsim; fi
"""


def zsh(commands: tuple[Command, ...]) -> str:
    """Return the completion function of zsh."""
    names = "\n".join(f"    {_quoted(f'{command.name}:{command.about}')}" for command in commands)
    cases = []
    for command in commands:
        specs = [
            f"{option.flag}[{_zsh_text(option.about)}]" + (f":value:{_ZSH_VALUE[option.value]}" if option.value else "")
            for option in command.options
        ]
        if command.words:
            specs.append(f"1:word:({' '.join(command.words)})")
        elif command.operand != _NOTHING:
            specs.append(f"*:file:{_ZSH_VALUE[command.operand]}")
        cases.append(f"    {command.name}) _arguments {' '.join(_quoted(spec) for spec in specs)} ;;")
    return _ZSH.format(names=names, cases="\n".join(cases))


def _zsh_text(text: str) -> str:
    return text.replace("[", "(").replace("]", ")").replace(":", r"\:")


def _quoted(text: str) -> str:
    return "'" + text.replace("'", r"'\''") + "'"


# -------------------------------------------------------------------------------------------------------- fish

_FISH_VALUE = {
    _NOTHING: "-x",
    _FOLDER: '-x -a "(__fish_complete_directories)"',
    _STUDY: '-k -x -a "(__fish_complete_suffix .yaml .yml)"',
    _FILE: "-r",
}


def fish(commands: tuple[Command, ...]) -> str:
    """Return the completion script of fish."""
    lines = ["# yieldsim completion for fish", "complete -c yieldsim -f"]
    for name, about in (("help", "show help"), ("version", "show the version")):
        lines.append(f"complete -c yieldsim -n __fish_use_subcommand -l {name} -d {_quoted(about)}")
    for command in commands:
        lines.append(f"complete -c yieldsim -n __fish_use_subcommand -a {command.name} -d {_quoted(command.about)}")
        here = f"complete -c yieldsim -n {_quoted(f'__fish_seen_subcommand_from {command.name}')}"
        if command.words:
            lines.append(f"{here} -x -a {_quoted(' '.join(command.words))}")
        elif command.operand != _NOTHING:
            lines.append(f"{here} {_FISH_VALUE[command.operand].replace('-r', '-F')}")
        for option in command.options:
            value = f" {_FISH_VALUE[option.value]}" if option.value else ""
            lines.append(f"{here} -l {option.flag.removeprefix('--')}{value} -d {_quoted(option.about)}")
    return "\n".join([*lines, ""])
