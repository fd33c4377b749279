"""Completion of the command line in the shell: commands, options and study files."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from pathlib import Path

SCRIPT = """\
# roadworth in bash and zsh; put this line into .bashrc or .zshrc, with the path of your copy:
#   source <({python} -m pipeline completion)     (in its folder, or with PYTHONPATH set to it)
roadworth() {{ PYTHONPATH='{folder}' '{python}' -m pipeline "$@"; }}
_roadworth() {{
  local word=${{COMP_WORDS[COMP_CWORD]}} before=${{COMP_WORDS[COMP_CWORD-1]}}
  if [[ $before == --output ]]; then COMPREPLY=( $(compgen -d -- "$word") )
  elif [[ $word == -* ]]; then COMPREPLY=( $(compgen -W '{options}' -- "$word") )
  elif (( COMP_CWORD == 1 )); then COMPREPLY=( $(compgen -W '{commands}' -- "$word") )
  elif [[ ${{COMP_WORDS[1]}} == compare ]]; then COMPREPLY=( $(compgen -d -- "$word") )
  else COMPREPLY=( $(compgen -f -X '!*.toml' -- "$word") $(compgen -d -S / -- "$word") )
  fi
}}
[[ -n ${{ZSH_VERSION-}} ]] && {{ autoload -U +X compinit bashcompinit; compinit; bashcompinit; }}
complete -o nospace -F _roadworth roadworth
"""


def completion_script(commands: Sequence[str], options: Sequence[str]) -> str:
    """A function `roadworth` for the shell, and how its arguments are completed.

    Parameters
    ----------
    commands, options : what the command line takes, as its parser knows them.
    """
    return SCRIPT.format(
        python=sys.executable,
        folder=Path(__file__).resolve().parents[1],
        commands=" ".join(commands),
        options=" ".join(sorted(options)),
    )
