"""Compare the verdict of the demo with the recipe it was simulated from; exit 1 where the truth is missed."""

import json
import math
import sys
from pathlib import Path

from regimes.synthetic import load_recipe, truth


def misses(verdict: dict, known: dict) -> list[str]:
    """What of the truth lies outside the stated 95 % intervals."""
    said = []
    regimes = list(known["regimes"])
    if verdict["sequences"][0]["regimes"] != regimes:
        said.append(f"most probable sequence {verdict['sequences'][0]['regimes']}, truth {regimes}")
    for lower, upper, scale in zip(regimes, regimes[1:], known["transitions_km"], strict=False):
        found = [t for t in verdict["transitions"] if (t["from"], t["to"]) == (lower, upper)]
        if not found or not found[0]["lo95_km"] <= scale <= found[0]["hi95_km"]:
            said.append(f"transition {lower} to {upper} at {scale} km: {found}")
    quoted = 0
    for slope in verdict["slopes"]:
        middle = math.sqrt(slope["range_km"][0] * slope["range_km"][1])
        piece = sum(middle >= scale for scale in known["transitions_km"])
        alpha = known["spectral_slopes"][piece]
        if slope["kind"] == "none" or alpha is None or slope["curve"] != "exit_rate":
            continue
        quoted += 1
        low = -math.inf if slope["lo95"] is None else slope["lo95"]
        high = math.inf if slope["hi95"] is None else slope["hi95"]
        if not low <= alpha <= high:
            said.append(f"alpha over {slope['range_km']} km: {low} to {high}, truth {alpha}")
    if not quoted:
        said.append("no slope was quoted")
    return said


def main(verdict_path: str, recipe_path: str) -> int:
    known = truth(load_recipe(recipe_path))
    said = misses(json.loads(Path(verdict_path).read_text(encoding="utf-8")), known)
    sys.stdout.write("\n".join(said or ["the demo's truth lies inside the stated intervals"]) + "\n")
    return 1 if said else 0


if __name__ == "__main__":
    sys.exit(main(*sys.argv[1:]))
