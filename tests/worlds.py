"""Kernel worlds for the statistical tests: pairs of known truth, records that end early."""

import tomllib
from concurrent.futures import ProcessPoolExecutor
from dataclasses import replace
from multiprocessing import get_context
from pathlib import Path

import numpy as np

from regimes.synthetic.kernel_flow import kernel_pairs
from regimes.theory.kernel import Kernel
from regimes.units import DAY, HOUR

CASES = Path(__file__).resolve().parent.parent / "cases"


def lossy_pairs(kernel: Kernel, n_pair: int, days: float, seed: int, start: float = 700.0):
    """Independent hourly pairs whose records end at random, exponentially with twice the duration as mean."""
    tracks, pairs = kernel_pairs(kernel, n_pair, start, HOUR, int(days * 24), seed)
    ends = 2 + np.random.default_rng(seed).exponential(2 * days * 24, n_pair).astype(int)
    return tracks, replace(pairs, length=np.minimum(pairs.length, ends))


def in_parallel(function, arguments):
    """Results of a module-level function over a list of arguments, on two processes."""
    with ProcessPoolExecutor(2, mp_context=get_context("spawn")) as pool:
        return list(pool.map(function, arguments, chunksize=10))


def kernel(exponents, breaks_km, rate_per_day, reference_km=1.0) -> Kernel:
    """Kernel with K / r^2 = rate at the reference separation."""
    return Kernel(exponents, np.asarray(breaks_km, float) * 1e3, rate_per_day / DAY, reference_km * 1e3)


def survey_recipe(seed: int) -> dict:
    """Recipe of the demo's sea with another seed: what `recipe_from` takes."""
    recipe = tomllib.loads((CASES / "merrowe-sea" / "recipe.toml").read_text(encoding="utf-8"))
    return recipe | {"seed": seed}
