"""Pass all tests of liverfe: ``python3 scripts/test.py`` on a machine with Python alone.

Makes `.venv` from the lock where it does not stand yet, then runs pytest on all cores.

    python3 scripts/test.py                 everything
    python3 scripts/test.py --fast          the core alone, in about a minute
    python3 scripts/test.py tests/fit -k rician     anything that pytest takes
"""

import sys

if not (3, 11) <= sys.version_info[:2] <= (3, 14):
    sys.exit("liverfe needs Python 3.11 to 3.14; this is Python " + sys.version.split()[0] + ".")

import subprocess

import environment

CORE = (
    "units grid errors sources outlines echoes noise fit maps regions calibration study acquire"
).split()
FAST = ["-m", "not slow and not bench", *(f"tests/{room}" for room in CORE)]
"""The core: reading and the science, without whole studies, reports and commands."""


def main(arguments: list[str]) -> int:
    """Run pytest in the environment and return its exit status."""
    try:
        python = environment.ready("develop")
    except environment.SetupFailed as failure:
        environment.say(str(failure))
        return 1
    if "--fast" in arguments:
        arguments = [*FAST, *(item for item in arguments if item != "--fast")]
    if not any(item in arguments for item in ("-n", "--pdb", "--collect-only")):
        arguments = ["-n", "auto", *arguments]
    tests = subprocess.run(
        [str(python), "-m", "pytest", *arguments],
        cwd=environment.ROOT,
        env=environment.variables(),
        check=False,
    )
    return tests.returncode


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
