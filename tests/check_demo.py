"""Compare the verdict of the demo with the recipe it was simulated from; exit 1 where the truth is missed."""

import json
import math
import sys
from pathlib import Path

from regimes.synthetic import load_recipe, truth

NAMES = {True: "exponential", False: "richardson"}  # of slopes steeper than 3, and of 5/3
LEAST_CHECKS = 7
# A separation r feels wavelengths from about 2 r to 2 pi r.
NEAREST, FARTHEST = 2.0, 2.0 * math.pi


def misses(verdict: dict, known: dict) -> list[str]:
    """What of the truth lies outside what is stated."""
    slopes, breaks = known["spectral_slopes"], known["break_wavelengths_km"]
    said = []
    regimes = [NAMES[alpha >= 3] for alpha in slopes]
    first = verdict["sequences"][0]["regimes"]
    if first[: len(regimes)] != regimes:
        said.append(f"most probable sequence {first}, truth {regimes} up to the longest waves")
    ends = [0.0, *breaks, known["wavelengths_km"][1]]
    for stretch in verdict["supported"]:
        if stretch["regime"] not in regimes:
            said.append(f"{stretch} is supported, truth {regimes}")
            continue
        piece = regimes.index(stretch["regime"])
        low, high = ends[piece] / FARTHEST, ends[piece + 1] / NEAREST
        if not low <= stretch["low_km"] < stretch["high_km"] <= high:
            said.append(f"{stretch} is supported, truth {low} to {high} km")
    quoted = 0
    for slope in verdict["slopes"]:
        middle = math.sqrt(slope["range_km"][0] * slope["range_km"][1])
        alpha = slopes[sum(FARTHEST * middle >= wave for wave in breaks)]
        if slope["kind"] == "none" or slope["curve"] != "exit_rate":
            continue
        quoted += 1
        said += _outside(f"alpha over {slope['range_km']} km", slope, alpha)
    if not quoted:
        said.append("no slope was quoted")
    spectrum = verdict["spectrum"]
    if spectrum["kind"] == "none":
        said.append(f"no slope of the spectrum: {spectrum['reason']}")
    else:
        said += _outside(f"spectrum over wavelengths {spectrum['wavelength_km']} km", spectrum, slopes[0])
    checks = verdict["checks"]
    said += [f"{check['curve']} dissents, p = {check['p_value']}" for check in checks if not check["agrees"]]
    if len(checks) < LEAST_CHECKS:
        said.append(f"only {len(checks)} curves were checked")
    if verdict["single_particle"] is None:
        said.append(f"no single-particle numbers: {verdict['single_particle_reason']}")
    return said


def _outside(what: str, interval: dict, alpha: float) -> list[str]:
    """The truth outside a 95 % interval; slopes of 3 and steeper are one to separations, and so are 1 and flatter."""
    low = -math.inf if interval["lo95"] is None else interval["lo95"]
    high = math.inf if interval["hi95"] is None or interval["hi95"] >= 3.0 else interval["hi95"]
    return [] if low <= alpha <= high else [f"{what}: {low} to {high}, truth {alpha}"]


def main(verdict_path: str, recipe_path: str) -> int:
    known = truth(load_recipe(recipe_path))
    said = misses(json.loads(Path(verdict_path).read_text(encoding="utf-8")), known)
    sys.stdout.write("\n".join(said or ["the demo's truth lies inside what is stated"]) + "\n")
    return 1 if said else 0


if __name__ == "__main__":
    sys.exit(main(*sys.argv[1:]))
