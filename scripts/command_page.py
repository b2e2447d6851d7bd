"""Write ``docs/reference/command-line.md`` from the program's own parser.

python3 scripts/command_page.py            write the page
python3 scripts/command_page.py --check    exit 1 if the page is not up to date
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parent.parent
PAGE = ROOT / "docs" / "reference" / "command-line.md"

if str(ROOT) not in sys.path:
    sys.path.insert(0, str(ROOT))

import typer  # noqa: E402

from liverfe.cli.program import app  # noqa: E402
from liverfe.journey import Settings  # noqa: E402

OPENING = """\
<!-- Made by scripts/command_page.py from the parser. Do not edit by hand. -->

# Command line

`liverfe COMMAND --help` shows the same. Every command takes `--json`: one JSON document on standard
output and nothing else there. Messages and progress go to standard error, progress bars only on a
terminal. `NO_COLOR` and `TERM=dumb` are obeyed.
"""

STATUSES = """\
## Exit statuses

| Status | When |
|---|---|
| 0 | Done. For `run`, also where R2\\* stands and no LIC may be stated: the document says why. |
| 1 | A fault of ours, told by incident, kind and place; or the system refused, say a lost disk. |
| 2 | Wrong usage: an option, a path, a settings file, an output folder that cannot be written. |
| 3 | `run`: the study is refused. `inspect`: nothing is usable. `verify`: something differs. |
| 4 | `batch`: some studies were refused or failed; each has its row. A dry run ends with 0. |
| 130 | Interrupted by Ctrl-C. A second Ctrl-C skips cleaning up. |

With `--json`, statuses 1 and 2 give `{"schema": 1, "error": {"kind": …, "message": …}}`, the kind
being `usage`, `system` or `fault`. A refused `run` gives the same document as `result.json`.
"""

SETTINGS = """\
## Settings

A setting is taken from the first of these that states it:

1. the option on the command line,
2. the environment: `LIVERFE_` and the name in capitals, for example `LIVERFE_CURVE`,
3. the project file, `liverfe.toml` in the working folder,
4. the user file, `config.toml` in the configuration folder.

A path in a file is meant from that file's folder. A locked method file stands against weaker
settings of `curve` and `bands`; an option that contradicts it is refused. `inspect --json` and
`batch --dry-run --json` show every setting with its origin.

| Setting | In files and environment | Default |
|---|---|---|
"""

SETTING_WORDS = {
    "curve": "key of the calibration curve",
    "bands": "key of the band set",
    "method": "a method file",
    "identity": "`full` or `key`: what the report may carry",
    "workers": "worker processes of a batch",
    "timeout_min": "minutes that one study of a batch may take",
    "curve_file": "a site's own curve files; in the environment parted as in `PATH`",
}

DEFAULTS = {
    "curve": "the field's own default",
    "bands": "`pmc8528353`",
    "method": "the house's",
    "workers": "one for each processor",
    "curve_file": "none",
}

FOLDER = """\
The configuration folder is `$XDG_CONFIG_HOME/liverfe` or `~/.config/liverfe` on Linux,
`~/Library/Application Support/liverfe` on macOS, `%APPDATA%\\liverfe` on Windows;
`LIVERFE_CONFIG_DIR` names another. It also holds `secret.key`, made on first use and readable by
its owner alone: study keys and patient keys are the first 16 hex digits of the HMAC-SHA256 of study
UID (path, for NIfTI) and patient ID with it. Whoever loses it gets other keys for the same studies,
so it belongs into the backup; workstations that must give the same keys share a copy.

`LIVERFE_TRACEBACK=1` shows where a fault happened. Its output may hold what stands in a header.
"""


def page() -> str:
    """Make the text of the page."""
    parts = [OPENING, STATUSES]
    group = typer.main.get_command(app)
    context = typer.Context(group, info_name="liverfe")  # type: ignore[arg-type]
    parts += list(_sections(group, context, "liverfe"))
    rows = [
        f"| `{name}` | {SETTING_WORDS[name]} | {_default(name)} |"
        for name in Settings().explained()
    ]
    parts += [SETTINGS.rstrip("\n") + "\n" + "\n".join(rows), FOLDER]
    return "\n".join(part.rstrip("\n") + "\n" for part in parts)


def _sections(group: Any, context: Any, typed: str) -> list[str]:
    sections = []
    for name, command in group.commands.items():
        below = typer.Context(command, info_name=name, parent=context)  # type: ignore[arg-type]
        if hasattr(command, "commands"):
            sections += _sections(command, below, f"{typed} {name}")
        else:
            sections.append(_section(command, below, f"{typed} {name}"))
    return sections


def _section(command: Any, context: Any, typed: str) -> str:
    lines = [f"## `{typed}`", "", _prose(command.help), "", "```text"]
    lines += command.epilog.splitlines()
    usage = " ".join(command.collect_usage_pieces(context)).replace("{", "").replace("}", "")
    lines += ["```", "", f"Usage: `{typed} {usage}`", "", "| Option | Meaning |", "|---|---|"]
    for parameter in command.params:
        record = parameter.get_help_record(context)
        if record is None:
            continue
        name, meaning = record
        if parameter.param_type_name == "argument":
            name = parameter.metavar
        lines.append(f"| `{_cell(name)}` | {_cell(_prose(meaning))} |")
    return "\n".join(lines)


def _prose(text: str) -> str:
    return " ".join(text.split()).replace("*", "\\*")


def _cell(text: str) -> str:
    return text.replace("|", "\\|")


def _default(name: str) -> str:
    value = getattr(Settings(), name)
    shown = f"{value:g}" if isinstance(value, float) else str(value)
    return DEFAULTS.get(name, f"`{shown}`")


def main(arguments: list[str]) -> int:
    """Write the page, or with ``--check`` compare it."""
    text = page()
    if arguments == ["--check"]:
        if PAGE.is_file() and PAGE.read_text("utf-8") == text:
            return 0
        sys.stderr.write(f"{PAGE.name} is not up to date: run scripts/command_page.py\n")
        return 1
    PAGE.write_text(text, "utf-8", newline="\n")
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
