"""Draws without replacement: each launch gets one launch of the larger set that no other has got."""

import numpy as np

from regimes.compare.matching import Choices
from regimes.errors import DataError

_TRIES = 50
_PILOT = 200


def draw_launches(choices: tuple[Choices, ...], rng: np.random.Generator) -> np.ndarray:
    """Which choice each launch gets: one launch of the larger set at random, never the same one twice.

    Launches with the fewest choices go first; where they run out all the same, the draw starts again.
    """
    order = np.argsort([c.distinct.size for c in choices], kind="stable")
    for _ in range(_TRIES):
        used = np.zeros(1 + max(int(c.distinct[-1]) for c in choices), bool)
        out = np.full(len(choices), -1)
        for i in order:
            c = choices[i]
            free = np.flatnonzero(~used[c.distinct])
            if free.size == 0:
                break
            which = free[rng.integers(free.size)]
            used[c.distinct[which]] = True
            out[i] = rng.integers(c.start[which], c.start[which + 1])
        if np.all(out >= 0):
            return out
    raise DataError(
        f"compare: got {len(choices)} groups that cannot all be given a group of their own of the larger case; each "
        "needs several with the same start separations; widen --same-place or --same-season, or use more releases"
    )


def effective_launches(choices: tuple[Choices, ...], n_large: int, rng: np.random.Generator) -> float:
    """Kish's effective number of launches, by how often each is drawn."""
    if any(c.launch.size == 0 for c in choices):
        return 0.0
    used = np.zeros(n_large)
    for _ in range(_PILOT):
        for c, i in zip(choices, draw_launches(choices, rng), strict=True):
            used[c.launch[i]] += 1
    share = used / used.sum()
    chance = 1.0 / (_PILOT * len(choices))  # what so few draws add to the sum of squares
    return float(1.0 / max(np.sum(share**2) - chance, 1.0 / n_large))
