"""Make `.venv` from the lock: what `demo.py`, `test.py`, `check` and `bench` stand on.

Standard library only and no shell, so that it runs alike on Linux, macOS and Windows. A record
inside `.venv` says what stands there and from which lock; where it fits, nothing is done.
"""

from __future__ import annotations

import hashlib
import json
import os
import platform
import shutil
import subprocess
import sys
import threading
import time
from collections import deque
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]
VENV = ROOT / ".venv"
LOCK = ROOT / "requirements.lock"
RECORD = VENV / "liverfe-environment.json"
BIN = VENV / ("Scripts" if os.name == "nt" else "bin")
SUFFIX = ".exe" if os.name == "nt" else ""

DEVELOP_MARK = "# ---- from here: tests and checks only ----\n"
"""Written by scripts/lock: what stands before it runs liverfe, what follows tests and checks it."""
ROOM_NEEDED_GB = {"run": 1.0, "develop": 1.6}
"""Free disk that a fresh install needs, packages on their way in included (measured on Linux)."""

_NETWORK_SIGNS = (
    "connection broken",
    "NewConnectionError",
    "NameResolutionError",
    "ConnectTimeout",
    "ReadTimeout",
    "Read timed out",
    "ProxyError",
    "SSLError",
    "CERTIFICATE_VERIFY_FAILED",
    "Network is unreachable",
)
_DISK_SIGNS = ("No space left on device", "Errno 28", "WinError 112", "Disk quota exceeded")


class SetupFailed(Exception):
    """The environment could not be made; the message says why and what to do."""


def ready(part: str) -> Path:
    """Make or complete `.venv` and return its Python.

    Parameters
    ----------
    part : {'run', 'develop'}
        What must stand there: the packages that liverfe runs on, or those of its tests too.

    Returns
    -------
    Path
        The interpreter of the environment, with liverfe installed from this checkout.

    Raises
    ------
    SetupFailed
        With a sentence for the person who called.
    """
    wanted = _wanted_record(part)
    found = _found_record()
    python = BIN / f"python{SUFFIX}"
    if found == wanted or ({**found, "part": part} == wanted and found["part"] == "develop"):
        return python

    started = time.monotonic()
    same_base = {**wanted, "part": "", "project": ""} == {**found, "part": "", "project": ""}
    if not same_base:
        _make_venv(part)
    RECORD.unlink(missing_ok=True)  # an install that is cut short must not look whole
    if not same_base or (found["part"], part) == ("run", "develop"):
        _install_packages(python, part)
    elif found["part"] == "develop":
        wanted["part"] = "develop"
    _install_project(python)
    RECORD.write_text(json.dumps(wanted, indent=1), encoding="utf-8")
    say(f"environment ready in {time.monotonic() - started:.0f} s")
    return python


def command(name: str) -> Path:
    """Return the path of an installed command of the environment."""
    return BIN / f"{name}{SUFFIX}"


def variables() -> dict[str, str]:
    """Return the variables to run things of the environment with.

    Packages are not compiled to bytecode when they are installed; Python does so for the modules
    that are imported. Where that is forbidden, each start would cost seconds, so here it is not.
    """
    ours = {key: value for key, value in os.environ.items() if key != "PYTHONDONTWRITEBYTECODE"}
    return {**ours, "PYTHONUTF8": "1"}


def say(text: str) -> None:
    """Tell the person at the terminal; stdout stays free for results."""
    print(text, file=sys.stderr, flush=True)


def _wanted_record(part: str) -> dict[str, str]:
    """Say what must be true of `.venv`: a change of any line means work."""
    return {
        "part": part,
        "python": f"{platform.python_implementation()} {platform.python_version()}",
        "machine": f"{platform.system()} {platform.machine()}",
        "place": str(VENV),  # a moved checkout leaves the old address in the installed commands
        "lock": hashlib.sha256(LOCK.read_bytes()).hexdigest(),
        "project": hashlib.sha256((ROOT / "pyproject.toml").read_bytes()).hexdigest(),
    }


def _found_record() -> dict[str, str]:
    try:
        record: dict[str, str] = json.loads(RECORD.read_text(encoding="utf-8"))
    except (OSError, ValueError):
        return {"part": ""}
    return record if (BIN / f"python{SUFFIX}").exists() else {"part": ""}


def _make_venv(part: str) -> None:
    """Make an empty environment, in place of an outdated one."""
    needed = ROOM_NEEDED_GB[part]
    free = shutil.disk_usage(ROOT).free / 1e9
    if free < needed:
        raise SetupFailed(
            f"The disk that holds this folder has {free:.1f} GB free; the packages need "
            f"{needed:.1f} GB. Free some, then run this again."
        )
    if Path(sys.prefix).resolve() == VENV.resolve() and os.name == "nt":
        raise SetupFailed(
            "The environment .venv is out of date and this very Python runs from it. "
            "Type `deactivate`, then run this again."
        )
    python = getattr(sys, "_base_executable", None) or sys.executable
    say(f"making .venv with Python {platform.python_version()}")
    made = subprocess.run(
        [python, "-m", "venv", "--clear", str(VENV)],
        stdout=subprocess.PIPE,
        stderr=subprocess.STDOUT,
        encoding="utf-8",
        errors="replace",
        check=False,
    )
    if made.returncode == 0:
        return
    if "ensurepip" in made.stdout or "No module named venv" in made.stdout:
        short = f"{sys.version_info.major}.{sys.version_info.minor}"
        raise SetupFailed(
            "This Python was packed without the part that makes environments. On Debian or "
            f"Ubuntu: `sudo apt install python{short}-venv`, then run this again. Elsewhere: "
            "take Python from its own installer."
        )
    raise SetupFailed(_why(made.stdout.splitlines(), "Python could not make .venv."))


def _install_packages(python: Path, part: str) -> None:
    """Install the pinned, hashed packages of `part`: wheels only, so that nothing is compiled."""
    text = LOCK.read_text(encoding="utf-8")
    if part == "run":
        text = text.split(DEVELOP_MARK)[0]
    pinned = VENV / f"packages-to-{part}.txt"
    pinned.write_text(text, encoding="utf-8")
    options = ["--require-hashes", "--only-binary", ":all:", "--no-compile", "-r", str(pinned)]
    _pip(python, options, text.count("=="), f"installing the packages to {part} liverfe")


def _install_project(python: Path) -> None:
    """Install this checkout itself, in place: the tests then test the files that you edit."""
    options = ["--no-deps", "--no-build-isolation", "--editable", str(ROOT)]
    _pip(python, options, 1, "installing liverfe itself")


def _pip(python: Path, options: list[str], n_packages: int, title: str) -> None:
    """Run pip, showing one line of progress in place of its hundreds."""
    arguments = [str(python), "-m", "pip", "--disable-pip-version-check", "install"]
    arguments += ["--no-input", "--progress-bar", "off", *options]
    last_lines: deque[str] = deque(maxlen=40)
    with subprocess.Popen(
        arguments,
        stdout=subprocess.PIPE,
        stderr=subprocess.STDOUT,
        stdin=subprocess.DEVNULL,
        encoding="utf-8",
        errors="replace",
        env=variables(),
    ) as pip:
        progress = _Progress(title, n_packages)
        assert pip.stdout is not None
        for line in pip.stdout:
            last_lines.append(line.rstrip())
            progress.heard(line)
        pip.wait()
        progress.close()
    if pip.returncode != 0:
        raise SetupFailed(_why(list(last_lines), f"pip failed while {title}."))


def _why(lines: list[str], otherwise: str) -> str:
    """Turn what a tool printed into a sentence with a remedy; its own words follow."""
    text = "\n".join(lines)
    if any(sign in text for sign in _DISK_SIGNS):
        reason = "The disk is full. Free about 2 GB, then run this again."
    elif any(sign in text for sign in _NETWORK_SIGNS):
        reason = (
            "The package index could not be reached. Check the network (behind a proxy: set "
            "HTTPS_PROXY), then run this again; what has arrived is kept by pip."
        )
    elif "DO NOT MATCH THE HASHES" in text:
        reason = (
            "A package is not the one that requirements.lock names. Do not use it: check where "
            "pip takes packages from (`python -m pip config list`)."
        )
    elif "No matching distribution found" in text:
        reason = (
            f"A package is not built for Python {platform.python_version()} on "
            f"{platform.system()} {platform.machine()}. Take a 64-bit Python 3.11 to 3.14 "
            "(3.11 to 3.13 on Macs with an Intel processor)."
        )
    else:
        reason = otherwise
    return "\n".join([reason, "", "The tool's last words:", *lines[-12:]])


class _Progress:
    """One line that counts packages and seconds, so that nobody thinks it hangs."""

    def __init__(self, title: str, n_packages: int) -> None:
        self._title, self._n_packages, self._n_heard = title, n_packages, 0
        self._step = ""
        self._on_terminal = sys.stderr.isatty()
        self._started = time.monotonic()
        self._over = threading.Event()
        self._thread = threading.Thread(target=self._tick, daemon=True)
        if self._on_terminal:
            self._thread.start()
        else:
            say(title)

    def heard(self, line: str) -> None:
        """Take in one line of pip's."""
        if line.startswith(("Collecting ", "Requirement already satisfied: ")):
            self._n_heard = min(self._n_heard + 1, self._n_packages)
            self._step = f"{self._n_heard} of {self._n_packages} fetched"
        elif line.startswith("Installing collected packages"):
            self._step = "unpacking"

    def close(self) -> None:
        """Stop counting and leave the line clean."""
        self._over.set()
        if self._on_terminal:
            self._thread.join()
            sys.stderr.write("\r\x1b[K" if os.name != "nt" else "\r" + " " * 79 + "\r")
            sys.stderr.flush()

    def _tick(self) -> None:
        while not self._over.wait(0.5):
            seconds = time.monotonic() - self._started
            sys.stderr.write(f"\r{self._title}: {self._step}  {seconds:.0f} s   ")
            sys.stderr.flush()
