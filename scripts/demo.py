"""See liverfe at work: ``python3 scripts/demo.py`` on a machine with Python alone.

Makes `.venv` from the lock where it does not stand yet, makes a synthetic study whose truth is
known, measures it with the installed `liverfe` command, and prints what came out beside the truth.
All of it lies in `liverfe-demo/` and `.venv/`; delete both to undo it. A second run takes seconds.
"""

import sys

if not (3, 11) <= sys.version_info[:2] <= (3, 14):
    sys.exit(
        "liverfe needs Python 3.11 to 3.14; this is Python "
        + sys.version.split()[0]
        + ". Install a newer one and run this script with it, for example: "
        + "python3.12 scripts/demo.py"
    )

import json
import shlex
import subprocess
from pathlib import Path
from typing import Any

import environment

RECIPE = "demo-thalassaemia-1p5t"
DEMO = Path("liverfe-demo")
STUDY = DEMO / "study"
RESULTS = DEMO / "results"


def main() -> int:
    """Set up, make the study, measure it and show the result; the status of what failed, if any."""
    try:
        environment.ready("run")
    except environment.SetupFailed as failure:
        environment.say(str(failure))
        return 1
    if not (environment.ROOT / STUDY / "truth" / "truth.json").is_file():
        made = liverfe("phantom", "make", RECIPE, "--out", str(STUDY))
        if made.returncode != 0:
            return made.returncode
    regions = STUDY / "regions" / "phantom_regions.nii.gz"
    run = ["run", str(STUDY / "images"), "--regions", str(regions), "--out", str(RESULTS)]
    done = liverfe(*run, "--json")
    if done.returncode != 0:
        print(done.stdout)
        return done.returncode
    show(json.loads(done.stdout))
    return 0


def liverfe(*arguments: str) -> subprocess.CompletedProcess[str]:
    """Run the installed command as anyone would, telling what is run; its messages pass through."""
    shown = [item for item in arguments if item != "--json"]
    environment.say("\n$ liverfe " + shlex.join(shown))
    return subprocess.run(
        [str(environment.command("liverfe")), *arguments],
        cwd=environment.ROOT,
        stdout=subprocess.PIPE,
        encoding="utf-8",
        env=environment.variables(),
        check=False,
    )


def show(result: dict[str, Any]) -> None:
    """Print one row a region, measured beside true, and where the report lies."""
    r2star_truth, lic_truth = true_r2star(), true_lic()
    row = "{:<20}{:>10}{:>10}{:>8}   {:<24}{:>8}{:>8}"
    print(f"\n{'':20}{'R2* (1/s)':>28}   {'LIC (mg Fe/g dry weight)':<40}")
    print(row.format("region", "measured", "truth", "diff", "measured [95 %]", "truth", "diff"))
    for region in result["regions"]:
        name, r2star, lic = region["name"], region["r2star_per_s"], region["lic_mg_per_g"]
        truth = r2star_truth.get(name)
        cells = [name, quantity(r2star, ".1f"), number(truth, ".1f"), percent(r2star, truth)]
        if lic is None:
            cells += ["- (no liver)", "", ""]
        else:
            interval = f"[{number(lic['low'], '.2f')}, {number(lic['high'], '.2f')}]"
            truth = lic_truth.get(name)
            cells += [f"{quantity(lic, '.2f')} {interval}", number(truth, ".2f")]
            cells += [percent(lic, truth)]
        print(row.format(*cells))
    curve = result["calibration"]
    print(f"\nCurve: {curve['key']}, {curve['citation']}")
    print(result["caution"])
    print(f"Report: {environment.ROOT / RESULTS / result['study']['key'] / 'report.pdf'}")


def true_r2star() -> dict[str, float]:
    """Read the median true R2* of each region, as the phantom wrote it."""
    path = environment.ROOT / STUDY / "truth" / "truth.json"
    regions = json.loads(path.read_text(encoding="utf-8"))["regions"]
    return {region["name"]: region["r2star_per_s"]["median"] for region in regions}


def true_lic() -> dict[str, float]:
    """Read the LIC that the recipe's R2* stands for, as its own file of expected values has it."""
    path = environment.ROOT / "phantoms" / "expected" / f"{RECIPE}.json"
    expected = json.loads(path.read_text(encoding="utf-8"))["expected"]
    return {
        item["region"]: item["value"] for item in expected if item["quantity"] == "lic_mg_per_g"
    }


def number(value: float | None, form: str) -> str:
    """Write a number, or a dash where there is none."""
    return "-" if value is None else format(value, form)


def quantity(entry: dict[str, Any], form: str) -> str:
    """Write a measured quantity with its `>` or `<`."""
    sign = "" if entry["qualifier"] == "=" else entry["qualifier"] + " "
    return sign + number(entry["value"], form)


def percent(entry: dict[str, Any], truth: float | None) -> str:
    """Write how far a measured value lies from the truth."""
    if truth is None or entry["value"] is None or entry["qualifier"] != "=":
        return ""
    return f"{100 * (entry['value'] / truth - 1):+.1f} %"


if __name__ == "__main__":
    sys.exit(main())
