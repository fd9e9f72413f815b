"""Completion scripts for bash, zsh and fish."""

from __future__ import annotations

from seqfault.cli.shells import Command


def bash(commands: tuple[Command, ...]) -> str:
    """The script for bash 4 or later."""
    cases = []
    for command in commands:
        takes = " ".join(
            f"[{name}]='{' '.join(option.words) or '@' + option.value}'"
            for option in command.options
            if option.value != "none"
            for name in option.names
        )
        flags = " ".join(name for option in command.options for name in option.names)
        words = " ".join(f"'{w if isinstance(w, str) else ' '.join(w)}'" for w in command.words)
        cases.append(f"    {command.name}) options='{flags}'; words=({words}); takes=({takes}) ;;")
    return BASH.format(commands=" ".join(c.name for c in commands), cases="\n".join(cases))


BASH = """\
# seqfault completion for bash (4 or later)
_seqfault_offer() {{  # offer the lines of standard input that begin with what was typed
  local line typed=$cur quote=''
  case $typed in \\"*|\\'*) quote=${{typed:0:1}}; typed=${{typed:1}} ;; esac
  typed=${{typed//\\\\/}}
  while IFS= read -r line; do
    [[ $line == "$typed"* ]] || continue
    case $quote in
      '') line=$(printf '%q' "$line") ;;
      \\") line=$(printf '%s' "$line" | sed 's/[\\\\"$`]/\\\\&/g') ;;
      *) [[ $line == *\\'* ]] && continue ;;
    esac
    COMPREPLY+=("$line")
  done
}}
_seqfault_files() {{  # case files and folders, or any file
  local IFS=$'\\n' name
  compopt -o filenames 2>/dev/null
  for name in $(compgen -f -- "$cur"); do
    if [[ $1 == any || -d $name || $name == *.toml || $name == *.json ]]; then
      COMPREPLY+=("$name")
    fi
  done
}}
_seqfault() {{
  local cur prev command='' options='' kind case_file='' i
  local -a line=("${{COMP_WORDS[@]}}") words=() given=()
  local -A takes=()
  COMPREPLY=()
  cur=${{line[COMP_CWORD]}}; prev=${{line[COMP_CWORD-1]}}
  [[ $cur == = ]] && cur=''
  [[ $prev == = || ${{line[COMP_CWORD]}} == = ]] && prev=${{line[COMP_CWORD-2]}}
  [[ ${{line[COMP_CWORD]}} == = ]] && prev=${{line[COMP_CWORD-1]}}
  for ((i = 1; i < COMP_CWORD; i++)); do
    if [[ ${{line[i]}} != -* ]]; then command=${{line[i]}}; break; fi
  done
  case $command in
    '') _seqfault_offer < <(printf '%s\\n' {commands} --help --version); return ;;
{cases}
    *) return ;;
  esac
  if [[ -n ${{takes[$prev]+set}} ]]; then
    case ${{takes[$prev]}} in
      @file) _seqfault_files any ;;
      @text) ;;
      *) _seqfault_offer < <(printf '%s\\n' ${{takes[$prev]}}) ;;
    esac
    return
  fi
  if [[ $cur == -* ]]; then _seqfault_offer < <(printf '%s\\n' $options); return; fi
  for ((i++; i < COMP_CWORD; i++)); do
    if [[ -n ${{takes[${{line[i]}}]+set}} ]]; then
      ((i++)); [[ ${{line[i]}} == = ]] && ((i++)); continue
    fi
    [[ ${{line[i]}} == -?* ]] || given+=("${{line[i]}}")
  done
  kind=${{words[${{#given[@]}}]-}}
  case $kind in
    '') ;;
    case) _seqfault_files case ;;
    place)
      case_file=${{given[0]//[\\\\\\"\\']/}}
      [[ $case_file == - ]] && return
      _seqfault_offer < <(seqfault inspect "$case_file" --places 2>/dev/null)
      ;;
    *) _seqfault_offer < <(printf '%s\\n' $kind) ;;
  esac
}}
complete -F _seqfault seqfault
"""


def zsh(commands: tuple[Command, ...]) -> str:
    """The script for zsh, after compinit."""
    cases = []
    for command in commands:
        specs = []
        for option in command.options:
            text = _zsh_text(option.help)
            for name in option.names:
                value = {
                    "none": "",
                    "file": ":file:_files",
                    "text": ":value: ",
                    "words": f":value:({' '.join(option.words)})",
                }[option.value]
                equals = "" if option.value == "none" or not name.startswith("--") else "="
                star = "*" if name in ("--without", "--open", "--close") else ""
                specs.append(f"'{star}{name}{equals}[{text}]{value}'")
        for number, words in enumerate(command.words, 1):
            action = {"case": '_files -g "*.(toml|json)"', "place": "_seqfault_places"}.get(
                words if isinstance(words, str) else "", f"({' '.join(words)})"
            )
            label = words if isinstance(words, str) else "word"
            specs.append(f"'{number}:{label}:{action}'")
        lines = " \\\n        ".join(specs)
        cases.append(f"      {command.name})\n        _arguments -s \\\n        {lines} ;;")
    names = "\n    ".join(f"'{c.name}:{_zsh_text(c.help)}'" for c in commands)
    return ZSH.format(names=names, cases="\n".join(cases))


def _zsh_text(text: str) -> str:
    for char in "\\[]:":
        text = text.replace(char, f"\\{char}")
    return text.replace("'", "’")


ZSH = """\
#compdef seqfault
_seqfault_places() {{
  local -a places
  places=("${{(@f)$(seqfault inspect "${{(Q)line[1]}}" --places 2>/dev/null)}}")
  compadd -a places
}}
_seqfault() {{
  local context state state_descr curcontext="$curcontext"
  local -a line commands
  local -A opt_args
  commands=(
    {names}
  )
  _arguments -C '--help[explain]' '--version[print the version]' '1:command:->command' \\
    '*::words:->words'
  case $state in
    command) _describe -t commands command commands ;;
    words)
      case $line[1] in
{cases}
      esac ;;
  esac
}}
if [[ $funcstack[1] == _seqfault ]]; then _seqfault "$@"; else compdef _seqfault seqfault; fi
"""


def fish(commands: tuple[Command, ...]) -> str:
    """The script for fish."""
    lines = [FISH]
    for command in commands:
        lines.append(
            f"complete -c seqfault -n __fish_use_subcommand -f -a {command.name}"
            f" -d {_fish_text(command.help)}"
        )
        here = f"-n '__fish_seen_subcommand_from {command.name}'"
        for option in command.options:
            names = " ".join(
                f"-l {name[2:]}" if name.startswith("--") else f"-s {name[1:]}" for name in option.names
            )
            value = {
                "none": "-f",
                "file": "-rF",
                "text": "-x",
                "words": f"-x -a '{' '.join(option.words)}'",
            }[option.value]
            lines.append(f"complete -c seqfault {here} {names} {value} -d {_fish_text(option.help)}")
        for number, words in enumerate(command.words):
            when = f"-n '__seqfault_at {command.name} {number}'"
            if words == "case":
                lines.append(f"complete -c seqfault {when} -k -f -a '(__seqfault_cases)'")
            elif words == "place":
                lines.append(f"complete -c seqfault {when} -f -a '(__seqfault_places)'")
            else:
                lines.append(f"complete -c seqfault {when} -f -a '{' '.join(words)}'")
    return "\n".join(lines) + "\n"


def _fish_text(text: str) -> str:
    return "'" + text.replace("\\", "\\\\").replace("'", "\\'") + "'"


FISH = """\
# seqfault completion for fish
function __seqfault_words  # the words typed that are no options, command first
    set -l tokens (commandline -opc)
    for token in $tokens[2..-1]
        string match -q -- '-?*' $token; or echo $token
    end
end
function __seqfault_at
    set -l words (__seqfault_words)
    test (count $words) -ge 1; and test "$words[1]" = $argv[1]
    and test (count $words) -eq (math $argv[2] + 1)
end
function __seqfault_cases
    __fish_complete_suffix .toml
    __fish_complete_suffix .json
end
function __seqfault_places
    set -l words (__seqfault_words)
    seqfault inspect $words[2] --places 2>/dev/null
end"""
